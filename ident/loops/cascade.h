// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <array>
#include <map>
#include <optional>
#include <vector>

#include "ident/axis.h"
#include "ident/loop_gains.h"
#include "ident/loops/margins.h"
#include "ident/models/state_space.h"
#include "ident/models/structure.h"

namespace hoverwright::ident {

/// How one axis is controlled: its loops from the inside out, as flown (one difference equation each, all at
/// the loop rate).
///   roll:  roll_rate, roll_angle, velocity_y, position_y      pitch: pitch_rate, pitch_angle, velocity_x,
///   position_x yaw:   yaw_rate, heading                                  heave: climb_rate, altitude
std::vector<Loop> loops_of_axis(Axis axis);

struct CascadeSetup {
  Axis axis = Axis::roll;
  double sample_rate_hz = 0.0;
  std::optional<double> gyro_filter_hz;  ///< on the rate the rate loop uses (roll, pitch, yaw)
  double speed_damping_1_s =
      0.0;  ///< horizontal speed decay of the lean-to-velocity model g/(s + speed_damping)
};

/// Axis model with everything the cascade measures as outputs: (rate, angle, velocity, position) or (climb
/// rate, altitude), sampled exactly with hold and delay. Heave structures that put out acceleration are
/// integrated.
SampledStateSpace cascade_plant(const CascadeSetup& setup, const Structure& structure,
                                const Eigen::VectorXd& parameters);

/// Closed-loop discrete poles of the axis with the loops `inner .. outer` closed (outer ones open), and the
/// loop gains.
struct CascadeAnalysis {
  std::map<Loop, Margins>
      loops;          ///< each broken where its error is formed, loops inside it closed, outside it open; the
                      ///< derivative on the measurement counts as part of the broken loop
  Margins at_demand;  ///< broken at the axis demand, all loops closed
};
/// @throws Failure (bad_input) where a flown loop has no loop inside it, or none is flown.
CascadeAnalysis analyse_cascade(const CascadeSetup& setup, const LoopGainSet& gains,
                                const Structure& structure, const Eigen::VectorXd& parameters,
                                const Eigen::VectorXd& frequency_hz);

}  // namespace hoverwright::ident
