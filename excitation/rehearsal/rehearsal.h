// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "excitation/schedule/schedule.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::excitation {

struct RehearsalOptions {
  std::uint64_t seed = 1;
  double settle_s = 10.0;  ///< hover before the schedule starts, not logged; gusts are there from the start
  bool turbulence = true;  ///< false: steady wind only
  bool sensor_noise = true;
  /// Outermost loops left open for experiments and tests: hold attitude only, no velocity/position loops
  /// (they then do not command lean), and/or no altitude/climb loops.
  bool position_loops = true;
  bool altitude_loops = true;
};

/// What one flight recorded, one row per control sample; SI units, vehicle conventions (z down; heave
/// upward).
struct FlightLog {
  double sample_rate_hz = 0.0;
  Eigen::VectorXd time_s;
  Eigen::MatrixX4d excitation, demand;   ///< roll, pitch, yaw, heave; demand is what the mixer receives
  Eigen::MatrixX3d rate_rad_s;           ///< gyro, unfiltered, noisy: p, q, r
  Eigen::MatrixX3d attitude_rad;         ///< roll, pitch, heading (measured)
  Eigen::MatrixX3d specific_force_m_s2;  ///< accelerometer, body axes
  Eigen::MatrixX3d position_m;           ///< north, east, down (measured)
  Eigen::MatrixX3d velocity_m_s;         ///< north, east, down (measured)
  Eigen::MatrixXd motor_command;         ///< one column per rotor, 0..1
  Eigen::Array<bool, Eigen::Dynamic, 1> saturated;
};

/// Largest excursions of the vehicle's true motion (no sensor noise) in a part of the flight: tilt from the
/// vertical, any body rate, any axis demand about its mean over the flight, horizontal distance from the
/// hover point, height about the hover height.
struct Peaks {
  double tilt_deg = 0.0, rate_deg_s = 0.0, demand = 0.0, drift_m = 0.0, climb_m = 0.0;
};

struct RecordPeaks {
  std::string record;
  ident::Axis axis = ident::Axis::roll;
  Peaks peaks;
  bool exceeds = false;  ///< at least one limit was exceeded in this record
};

/// Excursions against the limits, over the flight.
struct Excursions : Peaks {
  double saturated_share = 0.0;
  bool diverged = false;  ///< the vehicle was lost (tilt beyond 80° or not finite); the log ends there
  std::vector<std::string> exceeded;   ///< one sentence per limit exceeded, naming the record and the time
  std::vector<RecordPeaks> by_record;  ///< in the order flown
};

struct RehearsalResult {
  FlightLog log;
  Excursions excursions;
};

/// Flies the schedule: rigid body with quaternion attitude, rotors with speed lag, mixer, wind and Dryden
/// turbulence, sensors, and the cascade of the vehicle's `loops` at the loop rate with latency; RK4 with
/// fixed steps, split where delayed commands arrive. The excitation is added to the demands after the
/// feedback, the logged demand is what the mixer receives. It hovers at north = east = 0, down =
/// -weather.height_m, heading north. The same vehicle, schedule and options give the same bytes.
/// @throws Failure (bad_input) when the airframe or a needed loop is missing, or the schedule is for another
/// loop rate.
RehearsalResult rehearse(const ident::Vehicle& vehicle, const Schedule& schedule,
                         const RehearsalOptions& options);

/// The log as CSV. Columns: time_s, excite_roll..excite_heave, demand_roll..demand_heave, gyro_x, gyro_y,
/// gyro_z (rad/s), roll, pitch, heading (rad), accel_x, accel_y, accel_z (m/s², specific force, z down),
/// north, east, down (m), velocity_north, ..., motor_1..n.
std::string log_to_csv(const FlightLog& log);

}  // namespace hoverwright::excitation
