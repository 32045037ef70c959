// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <array>
#include <optional>

#include "ident/loops/discrete_filters.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::excitation {

/// What the sensors say at one control sample: SI units, noise included.
struct Measurement {
  Eigen::Vector3d rate_rad_s = Eigen::Vector3d::Zero();           ///< gyro, unfiltered
  Eigen::Vector3d attitude_rad = Eigen::Vector3d::Zero();         ///< roll, pitch, heading
  Eigen::Vector3d specific_force_m_s2 = Eigen::Vector3d::Zero();  ///< accelerometer, body axes
  Eigen::Vector3d position_m = Eigen::Vector3d::Zero();           ///< north, east, down
  Eigen::Vector3d velocity_m_s = Eigen::Vector3d::Zero();         ///< north, east, down
};

/// The cascade of the twelve hover loops, every loop one ident::Pid at the loop rate.
///   position -> velocity -> acceleration, in the heading frame; lean set points pitch = -atan(ax/g), roll =
///   atan(ay/g), the acceleration shortened to g tan(limits.tilt_deg); angle -> rate -> demand; heading
///   (error wrapped to ±180°) -> yaw rate -> demand; altitude -> climb rate -> collective, divided by the
///   cosine of the measured tilt.
/// Heave demand = (hover command + climb-rate output)/cos(tilt) - hover command: all that the mixer receives
/// about hover, so that heave output over demand is the vehicle alone. Rates pass the gyro filter first, if
/// the vehicle has one.
class HoverController {
 public:
  /// @throws Failure (bad_input) naming the first loop that is needed and not there, or whose gains cannot
  /// run.
  HoverController(const ident::Vehicle& vehicle, double hover_command, bool position_loops,
                  bool altitude_loops);

  /// Holds this place and heading from now on; the filters start from this measurement.
  void hold(const Measurement& measurement, const Eigen::Vector3d& position_m, double heading_rad);

  /// Demands of roll, pitch, yaw, heave for this sample.
  Eigen::Vector4d step(const Measurement& measurement);

 private:
  ident::Pid& loop(ident::Loop which) { return *loops_[ident::loop_index(which)]; }
  Eigen::Vector2d lean_set_point(const Measurement& measurement);  ///< roll, pitch
  double heave_demand(const Measurement& measurement);

  std::array<std::optional<ident::Pid>, 12> loops_;
  std::optional<std::array<ident::LowPass2, 3>> gyro_filter_;
  double hover_command_;
  double acceleration_limit_m_s2_;
  bool position_loops_, altitude_loops_;
  Eigen::Vector3d target_position_m_ = Eigen::Vector3d::Zero();
  double target_heading_rad_ = 0.0;
};

}  // namespace hoverwright::excitation
