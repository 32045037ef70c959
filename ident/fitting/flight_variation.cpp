// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/flight_variation.h"

#include <Eigen/Dense>
#include <algorithm>
#include <vector>

namespace hoverwright::ident {
namespace {

/// Below this share of the parameters left after the fit the comparison says nothing.
constexpr double kLeastShareLeft = 0.1;

}  // namespace

FlightVariation flight_variation(const FrequencyResponse& points, const Linearisation& optimum,
                                 const Eigen::VectorXcd& model, const Eigen::MatrixXd& gradient_covariance) {
  const std::size_t count = points.stretches.size();
  if (count < 3) return {};
  const Eigen::Index parameters = optimum.jacobian.cols();
  const Eigen::MatrixXd information_inverse = optimum.information().inverse();
  Eigen::VectorXd deviation(points.points());
  Eigen::VectorXcd demand(points.points());  // Û of the Jacobian's rows, from J = dH Û / σ
  for (Eigen::Index k = 0; k < points.points(); ++k) {
    const PairNoise& noise = points.noise[static_cast<std::size_t>(k)];
    const double variance = noise.variance_of_error(model[k]);
    deviation[k] = std::sqrt(variance);
    const std::complex<double> correction = std::conj(noise.ab) - std::conj(model[k]) * noise.bb;
    demand[k] = points.b[k] - correction * (points.a[k] - model[k] * points.b[k]) / variance;
  }
  std::vector<Eigen::VectorXd> gradient;
  std::vector<Eigen::MatrixXd> share;  // A⁻¹ A_i
  for (const ResponseStretch& stretch : points.stretches) {
    const Eigen::VectorXcd error =
        (stretch.a - model.cwiseProduct(stretch.b)).array() / deviation.array().cast<std::complex<double>>();
    gradient.emplace_back((optimum.jacobian.adjoint() * error).real());
    const Eigen::VectorXcd part = stretch.b.array() / demand.array();
    share.emplace_back(information_inverse *
                       (optimum.jacobian.adjoint() * part.asDiagonal() * optimum.jacobian).real());
  }
  Eigen::MatrixXd sum = Eigen::MatrixXd::Zero(parameters, parameters);
  double absorbed = 0.0;
  for (std::size_t i = 0; i < count; ++i) {
    for (std::size_t j = i > 0 ? i - 1 : 0; j < std::min(count, i + 2); ++j) {
      if (points.stretches[i].record != points.stretches[j].record) continue;
      sum += gradient[i] * gradient[j].transpose();
      absorbed += (share[i] * share[j]).trace();
    }
  }
  const double left = static_cast<double>(parameters) - absorbed;
  if (!(left > kLeastShareLeft * static_cast<double>(parameters))) return {};
  FlightVariation variation;
  variation.inflation = std::max(1.0, gradient_covariance.ldlt().solve(sum).trace() / left);
  variation.degrees_of_freedom = static_cast<double>(count) * left / 3.0;
  return variation;
}

}  // namespace hoverwright::ident
