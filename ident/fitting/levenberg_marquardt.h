// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <functional>
#include <optional>

namespace hoverwright::ident {

/// Weighted complex residuals r at θ and the matrix J for which the gradient of the cost |r|² is -2 Re(Jᴴ r).
/// J need not be -dr/dθ: a cost whose weights depend on θ brings the J of its own exact gradient.
struct Linearisation {
  Eigen::VectorXcd residual;
  Eigen::MatrixXcd jacobian;

  [[nodiscard]] Eigen::VectorXd descent() const {
    return (jacobian.adjoint() * residual).real();
  }  ///< Re(Jᴴ r)
  [[nodiscard]] Eigen::MatrixXd information() const {
    return (jacobian.adjoint() * jacobian).real();
  }  ///< Re(Jᴴ J)
};

struct LeastSquaresProblem {
  /// The cost |r(θ)|²; empty where θ is out of range.
  std::function<std::optional<double>(const Eigen::VectorXd&)> cost;
  std::function<Linearisation(const Eigen::VectorXd&)> linearise;
};

struct MarquardtOptions {
  int max_iterations = 100;
  /// Converged when the Gauss-Newton step would lower the cost by less than this. With residuals scaled by
  /// their standard deviation the cost is half a chi-square, and a decrease δ is a step of sqrt(2 δ) standard
  /// errors.
  double decrease_tolerance = 1e-14;
  std::optional<Eigen::Index> held;  ///< a parameter kept at its start value
};

struct MarquardtResult {
  bool converged = false;
  Eigen::VectorXd parameters;
  double cost = 0.0;
  int iterations = 0;
  double predicted_decrease = 0.0;    ///< of the Gauss-Newton step at `parameters`
  Eigen::VectorXd gauss_newton_step;  ///< there
};

/// Levenberg-Marquardt with Marquardt's scaling (J. SIAM 1963). A step that leaves the range is rejected and
/// shortened, never clipped: clipping turns the step away from descent. `start` must be in range. @throws
/// Failure (internal_error) if not.
MarquardtResult levenberg_marquardt(const LeastSquaresProblem& problem, const Eigen::VectorXd& start,
                                    const MarquardtOptions& options = {});

}  // namespace hoverwright::ident
