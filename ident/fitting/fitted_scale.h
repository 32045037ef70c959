// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>

#include "ident/models/structure.h"

namespace hoverwright::ident {

/// The scale a structure is fitted on: logarithm of the size for logarithmic parameters, the value for the
/// others. The sign of the effectiveness is kept aside.
class FittedScale {
 public:
  FittedScale(const Structure& structure, bool negative_effectiveness)
      : structure_(&structure), sign_(negative_effectiveness ? -1.0 : 1.0) {}

  [[nodiscard]] Eigen::VectorXd fitted(const Eigen::VectorXd& values) const;
  [[nodiscard]] Eigen::VectorXd values(const Eigen::VectorXd& fitted) const;
  /// d value / d fitted.
  [[nodiscard]] Eigen::VectorXd slope(const Eigen::VectorXd& values) const;
  /// Poles in order (1/motor_lag > damping), delay >= 0, everything finite and within bounds no craft comes
  /// near.
  [[nodiscard]] bool in_range(const Eigen::VectorXd& values, double sample_rate_hz) const;
  [[nodiscard]] const Structure& structure() const { return *structure_; }

 private:
  const Structure* structure_;
  double sign_;
};

}  // namespace hoverwright::ident
