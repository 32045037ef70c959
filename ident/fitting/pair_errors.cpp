// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/pair_errors.h"

#include <complex>

namespace hoverwright::ident {

Eigen::VectorXd error_variance(const FrequencyResponse& points, const Eigen::VectorXcd& response) {
  Eigen::VectorXd variance(response.size());
  for (Eigen::Index k = 0; k < response.size(); ++k)
    variance[k] = points.noise[static_cast<std::size_t>(k)].variance_of_error(response[k]);
  return variance;
}

std::optional<double> pair_cost(const FrequencyResponse& points, const Eigen::VectorXcd& response) {
  const Eigen::VectorXd variance = error_variance(points, response);
  if (!(variance.array() > 0.0).all()) return std::nullopt;
  const double cost = ((points.a - response.cwiseProduct(points.b)).array().abs2() / variance.array()).sum();
  return std::isfinite(cost) ? std::optional(cost) : std::nullopt;
}

std::optional<Eigen::VectorXcd> PairErrors::response(const Eigen::VectorXd& fitted) const {
  const Eigen::VectorXd values = scale_.values(fitted);
  if (!scale_.in_range(values, points_->sample_rate_hz)) return std::nullopt;
  return scale_.structure().sampled_response(values, points_->frequency_hz, points_->sample_rate_hz);
}

Eigen::MatrixXcd PairErrors::jacobian(const Eigen::VectorXd& fitted, Eigen::VectorXcd& response) const {
  const Eigen::VectorXd values = scale_.values(fitted);
  Eigen::MatrixXcd by_value;
  response =
      scale_.structure().sampled_response(values, points_->frequency_hz, points_->sample_rate_hz, &by_value);
  return by_value * scale_.slope(values).asDiagonal();
}

Linearisation PairErrors::linearise_at_model(const Eigen::VectorXd& fitted) const {
  Linearisation linear;
  Eigen::VectorXcd response;
  linear.jacobian = jacobian(fitted, response);
  linear.residual = points_->a - response.cwiseProduct(points_->b);
  for (Eigen::Index k = 0; k < response.size(); ++k) {
    const PairNoise& noise = points_->noise[static_cast<std::size_t>(k)];
    const double variance = noise.variance_of_error(response[k]);
    const double inverse_deviation = 1.0 / std::sqrt(variance);
    const std::complex<double> correction = std::conj(noise.ab) - std::conj(response[k]) * noise.bb;
    const std::complex<double> denoised = points_->b[k] - correction * linear.residual[k] / variance;
    linear.jacobian.row(k) *= denoised * inverse_deviation;
    linear.residual[k] *= inverse_deviation;
  }
  return linear;
}

LeastSquaresProblem PairErrors::maximum_likelihood() const {
  LeastSquaresProblem problem;
  problem.cost = [this](const Eigen::VectorXd& fitted) -> std::optional<double> {
    const auto model = response(fitted);
    return model ? pair_cost(*points_, *model) : std::nullopt;
  };
  problem.linearise = [this](const Eigen::VectorXd& fitted) { return linearise_at_model(fitted); };
  return problem;
}

LeastSquaresProblem PairErrors::fixed_weights(const Eigen::VectorXd& weights) const {
  const Eigen::VectorXd root = weights.cwiseSqrt();
  LeastSquaresProblem problem;
  problem.cost = [this, root](const Eigen::VectorXd& fitted) -> std::optional<double> {
    const auto model = response(fitted);
    if (!model) return std::nullopt;
    return ((points_->a - model->cwiseProduct(points_->b)).array() * root.array()).matrix().squaredNorm();
  };
  problem.linearise = [this, root](const Eigen::VectorXd& fitted) {
    Linearisation linear;
    Eigen::VectorXcd model;
    linear.jacobian = jacobian(fitted, model);
    linear.residual = root.asDiagonal() * (points_->a - model.cwiseProduct(points_->b));
    linear.jacobian = points_->b.cwiseProduct(root).asDiagonal() * linear.jacobian;
    return linear;
  };
  return problem;
}

}  // namespace hoverwright::ident
