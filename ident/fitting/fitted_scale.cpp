// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/fitted_scale.h"

#include <cmath>
#include <numbers>

namespace hoverwright::ident {

Eigen::VectorXd FittedScale::fitted(const Eigen::VectorXd& values) const {
  Eigen::VectorXd fitted = values;
  for (Eigen::Index i = 0; i < fitted.size(); ++i)
    if (structure_->parameters()[static_cast<std::size_t>(i)].logarithmic)
      fitted[i] = std::log(std::abs(values[i]));
  return fitted;
}

Eigen::VectorXd FittedScale::values(const Eigen::VectorXd& fitted) const {
  Eigen::VectorXd values = fitted;
  for (Eigen::Index i = 0; i < values.size(); ++i)
    if (structure_->parameters()[static_cast<std::size_t>(i)].logarithmic) values[i] = std::exp(fitted[i]);
  values[structure_->index_of("effectiveness")] *= sign_;
  return values;
}

Eigen::VectorXd FittedScale::slope(const Eigen::VectorXd& values) const {
  Eigen::VectorXd slope = Eigen::VectorXd::Ones(values.size());
  for (Eigen::Index i = 0; i < values.size(); ++i)
    if (structure_->parameters()[static_cast<std::size_t>(i)].logarithmic) slope[i] = values[i];
  return slope;
}

bool FittedScale::in_range(const Eigen::VectorXd& values, double sample_rate_hz) const {
  // A pole faster than the sampling acts within one sample; times beyond these cannot be told from none or
  // from a drift.
  const double fastest_rad_s = 2.0 * std::numbers::pi * sample_rate_hz;
  constexpr double kShortest_s = 1e-5, kLongest_s = 1e3, kLongestDelay_s = 1.0;
  if (!values.allFinite() || values[structure_->index_of("effectiveness")] == 0.0) return false;
  const double damping = values[structure_->index_of("damping")];
  const double delay = values[structure_->index_of("delay")];
  if (std::abs(damping) > fastest_rad_s || delay < 0.0 || delay > kLongestDelay_s) return false;
  for (const char* name : {"motor_lag", "reaction_lead"}) {
    if (!structure_->has_parameter(name)) continue;
    const double time = values[structure_->index_of(name)];
    if (time < kShortest_s || time > kLongest_s) return false;
  }
  return !structure_->has_parameter("motor_lag") || 1.0 / values[structure_->index_of("motor_lag")] > damping;
}

}  // namespace hoverwright::ident
