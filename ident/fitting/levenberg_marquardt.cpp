// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/levenberg_marquardt.h"

#include <Eigen/Cholesky>
#include <algorithm>
#include <cmath>

#include "ident/failure.h"

namespace hoverwright::ident {
namespace {

constexpr double kFirstDamping = 1e-3, kLeastDamping = 1e-10, kMostDamping = 1e12;
constexpr double kDampingUp = 8.0, kDampingDown = 0.1;

/// Normal equations scaled to a unit diagonal, a held parameter taken out.
class NormalEquations {
 public:
  NormalEquations(const Linearisation& linear, std::optional<Eigen::Index> held)
      : information_(linear.information()), descent_(linear.descent()) {
    scale_ = information_.diagonal().cwiseSqrt();
    for (Eigen::Index i = 0; i < scale_.size(); ++i)
      if (!(scale_[i] > 0.0))
        scale_[i] = 1.0;  // a parameter without effect: its descent is zero, and so is its step
    information_ = scale_.cwiseInverse().asDiagonal() * information_ * scale_.cwiseInverse().asDiagonal();
    descent_ = descent_.cwiseQuotient(scale_);
    if (held) {
      information_.row(*held).setZero();
      information_.col(*held).setZero();
      information_(*held, *held) = 1.0;
      descent_[*held] = 0.0;
    }
  }

  [[nodiscard]] Eigen::VectorXd step(double damping) const {
    Eigen::MatrixXd damped = information_;
    damped.diagonal().array() += damping;
    return damped.ldlt().solve(descent_).cwiseQuotient(scale_);
  }
  [[nodiscard]] double decrease(const Eigen::VectorXd& step) const {
    return descent_.dot(step.cwiseProduct(scale_));
  }

 private:
  Eigen::MatrixXd information_;
  Eigen::VectorXd descent_, scale_;
};

}  // namespace

MarquardtResult levenberg_marquardt(const LeastSquaresProblem& problem, const Eigen::VectorXd& start,
                                    const MarquardtOptions& options) {
  MarquardtResult result;
  result.parameters = start;
  const std::optional<double> first = problem.cost(start);
  if (!first)
    throw Failure(FailureKind::internal_error, "the start is out of range", "Levenberg-Marquardt", "");
  result.cost = *first;
  double damping = kFirstDamping;
  while (true) {
    const NormalEquations normal(problem.linearise(result.parameters), options.held);
    // A damping of 1e-14 keeps the factorisation finite where two parameters act alike.
    result.gauss_newton_step = normal.step(1e-14);
    result.predicted_decrease = normal.decrease(result.gauss_newton_step);
    if (result.predicted_decrease < options.decrease_tolerance) {
      result.converged = true;
      return result;
    }
    if (result.iterations >= options.max_iterations) return result;
    ++result.iterations;
    while (true) {
      const Eigen::VectorXd candidate = result.parameters + normal.step(damping);
      const std::optional<double> cost = candidate.allFinite() ? problem.cost(candidate) : std::nullopt;
      // The cost is a sum of many terms: 1e-13 of it is rounding, not a rise.
      if (cost && *cost <= result.cost * (1.0 + 1e-13)) {
        result.parameters = candidate;
        result.cost = *cost;
        damping = std::max(damping * kDampingDown, kLeastDamping);
        break;
      }
      damping = std::max(damping * kDampingUp, kFirstDamping);
      if (damping > kMostDamping) return result;
    }
  }
}

}  // namespace hoverwright::ident
