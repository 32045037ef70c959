// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <optional>

namespace hoverwright::ident {

/// A structure with its parameters filled in:
///   gain (lead s + constant) / (s + damping)                     without lag
///   gain (lead s + constant) / ((s + damping)(lag s + 1))        with lag
/// times exp(-delay s).
struct AxisNumbers {
  double gain = 0.0;
  double damping = 0.0;
  std::optional<double> lag;
  double lead = 0.0;
  double constant = 1.0;
  double delay = 0.0;
  bool lead_is_parameter = false;
};

/// Response behind a zero-order hold, see Structure::sampled_response; Jacobian columns in the structure's
/// order.
Eigen::VectorXcd sampled_axis_response(const AxisNumbers& numbers, const Eigen::VectorXd& frequency_hz,
                                       double sample_rate_hz, Eigen::MatrixXcd* jacobian);

}  // namespace hoverwright::ident
