// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <initializer_list>
#include <string>
#include <vector>

namespace hoverwright::tests {

/// A structure with parameters a multirotor could have, or one that is hard on the numbers.
struct AxisCase {
  std::string name;
  std::string structure;
  Eigen::VectorXd parameters;
};

inline Eigen::VectorXd values(std::initializer_list<double> list) {
  Eigen::VectorXd vector(static_cast<Eigen::Index>(list.size()));
  Eigen::Index i = 0;
  for (double value : list) vector[i++] = value;
  return vector;
}

inline std::vector<AxisCase> axis_cases() {
  return {
      {"rate without lag", "rate_damped", values({55, 0.8, 0.012})},
      {"rate, unstable slow pole", "rate_damped", values({55, -0.3, 0.0071})},
      {"roll rate", "rate_motor_lag", values({230, 2.0, 0.05, 0.0083})},
      {"roll rate, reversed wiring", "rate_motor_lag", values({-230, 2.0, 0.05, 0.0083})},
      {"pure integrator with lag", "rate_motor_lag", values({180, 0.0, 0.045, 0.00625})},
      {"poles a thousandth apart", "rate_motor_lag", values({100, 19.98, 0.05, 0.0083})},
      {"equal poles", "rate_motor_lag", values({100, 20.0, 0.05, 0.0083})},
      {"poles 9 % apart", "yaw_reaction", values({10, 18.2, 0.05, 0.11, 0.0083})},
      {"poles 11 % apart", "yaw_reaction", values({10, 17.8, 0.05, 0.11, 0.0083})},
      {"yaw", "yaw_reaction", values({10, 0.3, 0.05, 0.11, 0.0083})},
      {"heave", "heave_accel", values({24, 0.8, 0.05, 0.0083})},
      {"heave, equal poles", "heave_accel", values({24, 20.0, 0.05, 0.0083})},
      {"climb", "climb_rate", values({24, 0.8, 0.05, 0.0083})},
      {"no delay at all", "rate_motor_lag", values({230, 2.0, 0.05, 0.0})},
      {"less than half a sample", "heave_accel", values({24, 0.8, 0.05, 0.0007})},
      {"half a sample", "yaw_reaction", values({10, 0.3, 0.05, 0.11, 0.00125})},
      {"whole samples of delay", "rate_damped", values({55, 0.8, 0.00125 + 4 * 0.0025})},
  };
}

}  // namespace hoverwright::tests
