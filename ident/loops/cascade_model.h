// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <vector>

#include "ident/loops/cascade.h"

namespace hoverwright::ident {

// The parts analyse_cascade and recommend_axis share. Level i counts the loops of an axis from the inside, 0
// first.

/// Factor from the output of loop `level` to the set point of the loop inside it: 1/g for velocity loops
/// (acceleration to lean angle, atan linearised), else 1.
double output_factor(Axis axis, std::size_t level);

/// Gains of the loops the axis flies, inside out. @throws Failure (bad_input) when the innermost is missing
/// or an outer loop has no loop inside it.
std::vector<LoopGains> flown_gains(const CascadeSetup& setup, const LoopGainSet& gains);

/// P_i(z) from the demand to what loop i measures, on the grid: one column per level.
Eigen::MatrixXcd plant_responses(const SampledStateSpace& plant, const Eigen::VectorXd& frequency_hz);

/// What the controller of one loop does to its error and to its measurement, on the grid.
struct ControllerResponse {
  Eigen::VectorXcd error;       ///< E: set point minus measurement to output
  Eigen::VectorXcd derivative;  ///< D: measurement to minus output, derivative path only
};
ControllerResponse controller_response(const LoopGains& gains, double sample_rate_hz, double factor,
                                       const Eigen::VectorXd& frequency_hz);

/// Gyro filter on the grid (ones without one).
Eigen::VectorXcd gyro_filter_response(const CascadeSetup& setup, const Eigen::VectorXd& frequency_hz);

/// Loop gains of the cascade, from the inside out, with Q_i the response from the set point of loop i to the
/// demand (Q_{-1} = 1):
///   L_i = Q_{i-1} P_i (E_i + D_i),  Q_i = Q_{i-1} E_i / (1 + L_i),  P_0 through the gyro filter,
/// and at the demand, all loops closed, 1 + L = Π (1 + L_i).
struct CascadeGains {
  std::vector<Eigen::VectorXcd> loops;  ///< L_i, loops inside closed, outside open
  Eigen::VectorXcd demand;
};
CascadeGains cascade_gains(const Eigen::MatrixXcd& plant, const Eigen::VectorXcd& gyro_filter,
                           const std::vector<ControllerResponse>& controllers);

/// Largest magnitude of the closed loop's discrete poles with loops 0 .. depth-1 closed, the outer ones and
/// their states away. Stable if below one.
double spectral_radius(const CascadeSetup& setup, const SampledStateSpace& plant,
                       const std::vector<LoopGains>& gains, std::size_t depth);

/// The matrix spectral_radius takes the eigenvalues of: one sample of plant, gyro filter and controllers.
Eigen::MatrixXd closed_loop_matrix(const CascadeSetup& setup, const SampledStateSpace& plant,
                                   const std::vector<LoopGains>& gains, std::size_t depth);

}  // namespace hoverwright::ident
