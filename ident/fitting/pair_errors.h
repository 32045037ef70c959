// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <optional>

#include "ident/fitting/fitted_scale.h"
#include "ident/fitting/levenberg_marquardt.h"
#include "ident/spectra/frequency_response.h"

namespace hoverwright::ident {

/// |a_k - H_k b_k|² / σ_k²(H), σ² = [1,-H] C [1,-H]*, summed; empty where a variance is not positive.
std::optional<double> pair_cost(const FrequencyResponse& points, const Eigen::VectorXcd& response);

/// σ_k²(H) of every point.
Eigen::VectorXd error_variance(const FrequencyResponse& points, const Eigen::VectorXcd& response);

/// The errors a - H(θ) b of a structure on measured pairs, as problems for the optimiser on the fitted scale.
class PairErrors {
 public:
  PairErrors(const FrequencyResponse& points, const FittedScale& scale) : points_(&points), scale_(scale) {}

  /// Variance at the model, its derivative in the gradient: J = dH Û / σ, Û = b - c (a - H b) / σ²,
  /// c = E[n_b conj(n_a - H n_b)] = conj(C_ab) - conj(H) C_bb. (d|r|² / σ² written out gives exactly this J.)
  [[nodiscard]] LeastSquaresProblem maximum_likelihood() const;
  /// Errors times √weight_k, weights that do not move: the way to a start.
  [[nodiscard]] LeastSquaresProblem fixed_weights(const Eigen::VectorXd& weights) const;

  [[nodiscard]] std::optional<Eigen::VectorXcd> response(
      const Eigen::VectorXd& fitted) const;  ///< empty out of range
  [[nodiscard]] Linearisation linearise_at_model(const Eigen::VectorXd& fitted) const;
  [[nodiscard]] const FrequencyResponse& points() const { return *points_; }
  [[nodiscard]] const FittedScale& scale() const { return scale_; }

 private:
  /// dH/d(fitted), with H.
  Eigen::MatrixXcd jacobian(const Eigen::VectorXd& fitted, Eigen::VectorXcd& response) const;

  const FrequencyResponse* points_;
  FittedScale scale_;
};

}  // namespace hoverwright::ident
