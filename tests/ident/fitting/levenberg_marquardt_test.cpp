// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/levenberg_marquardt.h"

#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>
#include <complex>

#include "ident/failure.h"

using namespace hoverwright::ident;

namespace {

/// Rosenbrock's valley, r = (10 (y - x²), 1 - x), as complex residuals; x above `limit` is out of range.
LeastSquaresProblem valley(double limit) {
  LeastSquaresProblem problem;
  const auto residual = [](const Eigen::VectorXd& p) {
    return Eigen::VectorXcd(
        Eigen::Vector2cd(std::complex<double>(0.0, 10.0 * (p[1] - p[0] * p[0])), 1.0 - p[0]));
  };
  problem.cost = [=](const Eigen::VectorXd& p) -> std::optional<double> {
    if (p[0] > limit) return std::nullopt;
    return residual(p).squaredNorm();
  };
  problem.linearise = [=](const Eigen::VectorXd& p) {
    Eigen::MatrixXcd minus_derivative(2, 2);
    minus_derivative << std::complex<double>(0.0, 20.0 * p[0]), std::complex<double>(0.0, -10.0), 1.0, 0.0;
    return Linearisation{residual(p), minus_derivative};
  };
  return problem;
}

}  // namespace

TEST_CASE("Levenberg-Marquardt: reaches the bottom of Rosenbrock's valley") {
  const MarquardtResult result = levenberg_marquardt(valley(10.0), Eigen::Vector2d(-1.2, 1.0));
  REQUIRE(result.converged);
  CHECK(result.parameters[0] ==
        Approx(1.0).epsilon(1e-6));  // decrease below 1e-14: a step below 1e-7·√curvature
  CHECK(result.parameters[1] == Approx(1.0).epsilon(1e-6));
}

TEST_CASE("Levenberg-Marquardt: steps out of range are shortened, and the end is told as not converged") {
  const MarquardtResult result = levenberg_marquardt(valley(0.5), Eigen::Vector2d(-1.2, 1.0));
  CHECK_FALSE(result.converged);
  CHECK(result.parameters[0] <= 0.5);
  CHECK(result.predicted_decrease > 0.01);
}

TEST_CASE("Levenberg-Marquardt: a held parameter stays, the other is optimal for it") {
  MarquardtOptions options;
  options.held = 0;
  const MarquardtResult result = levenberg_marquardt(valley(10.0), Eigen::Vector2d(0.7, 3.0), options);
  REQUIRE(result.converged);
  CHECK(result.parameters[0] == 0.7);
  CHECK(result.parameters[1] == Approx(0.49).epsilon(1e-7));
}

TEST_CASE("Levenberg-Marquardt: stops at the iteration limit and refuses a start out of range") {
  MarquardtOptions options;
  options.max_iterations = 3;
  const MarquardtResult result = levenberg_marquardt(valley(10.0), Eigen::Vector2d(-1.2, 1.0), options);
  CHECK_FALSE(result.converged);
  CHECK(result.iterations == 3);
  CHECK_THROWS_AS(levenberg_marquardt(valley(0.0), Eigen::Vector2d(1.0, 1.0)), Failure);
}
