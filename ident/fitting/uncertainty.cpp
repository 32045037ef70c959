// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/uncertainty.h"

#include <Eigen/Dense>
#include <algorithm>
#include <boost/math/distributions/students_t.hpp>
#include <cmath>

#include "ident/fitting/flight_variation.h"

namespace hoverwright::ident {
namespace {

/// Covariance of Re(Jᴴ r) for unit circular noise with the carried correlation, row k of J scaled by
/// row_scale[k]: E[Re(x* r_k) Re(y* r_l)] = ½ Re(x* ρ_kl y), ρ_kl = E[r_k conj(r_l)].
Eigen::MatrixXd gradient_covariance(const FrequencyResponse& points, const Eigen::MatrixXcd& jacobian,
                                    const Eigen::VectorXd& row_scale) {
  const Eigen::MatrixXcd rows = row_scale.asDiagonal() * jacobian;
  const Eigen::Index count = rows.rows();
  Eigen::MatrixXd sum = (rows.adjoint() * rows).real();
  for (Eigen::Index d = 1; d <= 2 && d < count; ++d) {
    const Eigen::VectorXcd rho =
        points.neighbour_correlation[static_cast<std::size_t>(d - 1)].head(count - d);
    const Eigen::MatrixXd cross =
        (rows.topRows(count - d).adjoint() * rho.asDiagonal() * rows.bottomRows(count - d)).real();
    sum += cross + cross.transpose();
  }
  return 0.5 * sum;
}

/// Inverse of a positive matrix scaled to unit diagonal; empty where it is singular to rounding.
std::optional<Eigen::MatrixXd> inverse(const Eigen::MatrixXd& information) {
  const Eigen::VectorXd scale = information.diagonal().cwiseSqrt();
  if (!(scale.array() > 0.0).all() || !scale.allFinite()) return std::nullopt;
  const Eigen::MatrixXd unit =
      scale.cwiseInverse().asDiagonal() * information * scale.cwiseInverse().asDiagonal();
  const Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd> eigen(unit);
  // Eigenvalues of a unit-diagonal matrix are exact to some 1e-16; 1e-13 keeps three digits of the smallest.
  if (!(eigen.eigenvalues().minCoeff() > 1e-13)) return std::nullopt;
  const Eigen::MatrixXd unit_inverse = eigen.eigenvectors() *
                                       eigen.eigenvalues().cwiseInverse().asDiagonal() *
                                       eigen.eigenvectors().transpose();
  return scale.cwiseInverse().asDiagonal() * unit_inverse * scale.cwiseInverse().asDiagonal();
}

}  // namespace

std::optional<FitUncertainty> fit_uncertainty(const FrequencyResponse& points, const Linearisation& optimum,
                                              const Eigen::VectorXcd& model) {
  const auto information_inverse = inverse(optimum.information());
  if (!information_inverse) return std::nullopt;
  const Eigen::ArrayXd q = points.degrees_of_freedom.array();
  const double count = static_cast<double>(points.points());

  const Eigen::MatrixXd plain =
      gradient_covariance(points, optimum.jacobian, Eigen::VectorXd::Ones(points.points()));
  const Eigen::VectorXd noise_scale = (1.0 / (1.0 - 2.0 / q)).sqrt();
  const Eigen::MatrixXd widened = gradient_covariance(points, optimum.jacobian, noise_scale);

  const double absorbed = (*information_inverse * plain).trace();
  const double left = count - absorbed;
  double spread = count;
  for (const auto& rho : points.neighbour_correlation) spread += 2.0 * rho.squaredNorm();

  FitUncertainty uncertainty;
  uncertainty.reduced_chi_square = (optimum.residual.array().abs2() * (1.0 - 1.0 / q)).sum() / left;
  uncertainty.residual_degrees_of_freedom = 2.0 * left * count / spread;
  uncertainty.covariance = *information_inverse * widened * *information_inverse;
  const FlightVariation variation = flight_variation(points, optimum, model, widened);
  uncertainty.flight_variation = variation.inflation;
  const double misfit = std::max(1.0, uncertainty.reduced_chi_square);
  uncertainty.covariance *= std::max(misfit, variation.inflation);
  uncertainty.interval_degrees_of_freedom = uncertainty.residual_degrees_of_freedom;
  if (variation.inflation > misfit) {
    const double excess = variation.inflation - 1.0;
    uncertainty.interval_degrees_of_freedom =
        variation.inflation * variation.inflation /
        (1.0 / uncertainty.residual_degrees_of_freedom + excess * excess / variation.degrees_of_freedom);
  }
  uncertainty.covariance = 0.5 * (uncertainty.covariance + uncertainty.covariance.transpose()).eval();
  const bool usable = left > 0.0 && uncertainty.covariance.allFinite() &&
                      (uncertainty.covariance.diagonal().array() > 0.0).all();
  return usable ? std::optional(uncertainty) : std::nullopt;
}

double student_t(double confidence, double degrees_of_freedom) {
  return boost::math::quantile(boost::math::students_t(degrees_of_freedom), 0.5 + 0.5 * confidence);
}

}  // namespace hoverwright::ident
