// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Dense>
#include <cmath>
#include <string>
#include <vector>

#include "ident/fitting/model_fit.h"
#include "ident/loops/cascade.h"

namespace hoverwright::tests {

using namespace hoverwright::ident;

/// Axes of about Tern's size, its loop rate and gyro filter, and its present gains.
inline CascadeSetup tern_setup(Axis axis) {
  CascadeSetup setup;
  setup.axis = axis;
  setup.sample_rate_hz = 400.0;
  setup.gyro_filter_hz = 80.0;
  setup.speed_damping_1_s = 0.1;
  return setup;
}

inline LoopGains loop_gains(double kp, double ki = 0.0, double kd = 0.0) {
  LoopGains gains;
  gains.kp = kp;
  gains.ki = ki;
  gains.kd = kd;
  if (kd != 0.0) gains.derivative_cutoff_hz = 40.0;
  return gains;
}

inline LoopGainSet tern_gains() {
  LoopGainSet set{};
  const auto put = [&](Loop loop, double kp, double ki, double limit) {
    set[loop_index(loop)] = loop_gains(kp, ki);
    set[loop_index(loop)]->limit = limit;
  };
  put(Loop::roll_rate, 0.045, 0.05, 0.3);
  put(Loop::roll_angle, 3.0, 0.0, 1.5);
  put(Loop::velocity_y, 1.2, 0.25, 3.5);
  put(Loop::position_y, 0.5, 0.0, 2.0);
  put(Loop::yaw_rate, 0.25, 0.15, 0.3);
  put(Loop::heading, 1.2, 0.0, 0.8);
  put(Loop::climb_rate, 0.10, 0.05, 0.3);
  put(Loop::altitude, 0.8, 0.0, 1.5);
  return set;
}

inline Eigen::VectorXd tern_roll() {
  return Eigen::Vector4d(272.0, 2.4, 0.045, 0.00725);
}
inline Eigen::VectorXd tern_yaw() {
  return Eigen::Matrix<double, 5, 1>{10.0, 0.3, 0.045, 0.12, 0.00725};
}
inline Eigen::VectorXd tern_heave() {
  return Eigen::Vector4d(24.0, 0.8, 0.045, 0.00725);
}

/// A fit with given values and independent errors: `fitted_error` on the fitted scale (logarithm or value).
inline ModelFit made_fit(const std::string& structure, const Eigen::VectorXd& values,
                         const Eigen::VectorXd& fitted_error, double band_low_hz = 0.3,
                         double band_high_hz = 20.0) {
  ModelFit fit;
  fit.status = FitStatus::converged;
  fit.structure = structure;
  fit.sample_rate_hz = 400.0;
  fit.points = 100;
  fit.residual_degrees_of_freedom = 190.0;
  fit.reduced_chi_square = 1.0;
  fit.band_low_hz = band_low_hz;
  fit.band_high_hz = band_high_hz;
  fit.fitted_covariance = fitted_error.cwiseAbs2().asDiagonal();
  Eigen::VectorXd error = fitted_error;
  const auto& specs = Structure::find(structure).parameters();
  for (std::size_t i = 0; i < specs.size(); ++i) {
    const auto at = static_cast<Eigen::Index>(i);
    if (specs[i].logarithmic) error[at] *= values[at];
    fit.parameters.push_back({specs[i].name, specs[i].unit, values[at], error[at],
                              values[at] - 2.0 * error[at], values[at] + 2.0 * error[at], true});
  }
  fit.covariance = error.cwiseAbs2().asDiagonal();
  return fit;
}

/// Precision of a good flight on Tern: 2 % effectiveness, 0.3 1/s damping, 2.5 % lag, 0.3 ms delay.
inline Eigen::VectorXd good_errors() {
  return Eigen::Vector4d(0.02, 0.3, 0.025, 0.0003);
}

inline Eigen::VectorXd log_grid(double low_hz, double high_hz, int points) {
  Eigen::VectorXd grid(points);
  for (int k = 0; k < points; ++k) grid[k] = low_hz * std::pow(high_hz / low_hz, k / (points - 1.0));
  return grid;
}

}  // namespace hoverwright::tests
