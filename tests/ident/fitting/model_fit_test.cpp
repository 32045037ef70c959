// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/model_fit.h"

#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>

#include "ident/failure.h"
#include "ident/fitting/fitted_scale.h"
#include "ident/fitting/levenberg_marquardt.h"
#include "ident/fitting/pair_errors.h"
#include "tests/ident/fitting/synthetic_axis.h"

using namespace hoverwright::ident;
using namespace hoverwright::tests;

namespace {

std::vector<SyntheticAxis> axes() {
  SyntheticAxis damped{"rate_damped", values({55, 0.8, 0.012}), 0.2, 0.2, false};
  SyntheticAxis climb{"climb_rate", values({24, 0.8, 0.05, 0.0083}), 0.1, 0.05, false};
  return {damped, roll_axis(), yaw_axis(), heave_axis(), climb};
}

bool mentions(const ModelFit& fit, const std::string& words) {
  for (const auto& warning : fit.warnings)
    if (warning.find(words) != std::string::npos) return true;
  return false;
}

}  // namespace

TEST_CASE("model fit: noise-free points give back every parameter of every structure") {
  for (const auto& axis : axes()) {
    INFO(axis.structure);
    const ModelFit fit = fit_model(exact_points(axis, false), Structure::find(axis.structure));
    REQUIRE(fit.status == FitStatus::converged);
    CHECK(fit.reason.empty());
    for (Eigen::Index i = 0; i < axis.parameters.size(); ++i) {
      INFO(fit.parameters[static_cast<std::size_t>(i)].name);
      // The search stops sqrt(2e-14) = 1.4e-7 standard errors away; the largest relative standard error here
      // is below one.
      CHECK(fit.values()[i] == Approx(axis.parameters[i]).epsilon(1e-6));
    }
    CHECK(fit.reduced_chi_square < 1e-10);
  }
}

TEST_CASE("model fit: gradient of the cost, its variance moving with the model, equals finite differences") {
  std::mt19937_64 engine(11);
  for (const auto& axis : axes()) {
    INFO(axis.structure);
    const Structure& structure = Structure::find(axis.structure);
    const FrequencyResponse points = noisy_points(axis, exact_points(axis, true), true, engine);
    const FittedScale scale(structure, false);
    Eigen::VectorXd fitted = scale.fitted(axis.parameters);
    fitted.array() +=
        0.03;  // away from the optimum; the delay moves by 30 ms: a large residual, all terms matter
    fitted[structure.index_of("delay")] = axis.parameters[structure.index_of("delay")] + 0.0004;
    const Linearisation linear = PairErrors(points, scale).linearise_at_model(fitted);
    const Eigen::VectorXd gradient = -2.0 * linear.descent();
    const auto cost = [&](Eigen::Index i, double step) {
      Eigen::VectorXd shifted = fitted;
      shifted[i] += step;
      return fit_cost(points, structure, scale.values(shifted));
    };
    for (Eigen::Index i = 0; i < fitted.size(); ++i) {
      const double h = i == structure.index_of("delay") ? 1e-5 : 1e-3;
      const double difference = (45 * (cost(i, h) - cost(i, -h)) - 9 * (cost(i, 2 * h) - cost(i, -2 * h)) +
                                 cost(i, 3 * h) - cost(i, -3 * h)) /
                                (60 * h);
      // Sixth order: truncation (h/scale)⁶ ~ 1e-15; rounding 1e-16·cost/h, cost some 1e3: 1e-10 of gradients
      // of 1e2 and more.
      CHECK(gradient[i] == Approx(difference).epsilon(1e-7).margin(1e-6));
    }
  }
}

TEST_CASE("model fit: reversed wiring is fitted with a negative effectiveness and said in words") {
  SyntheticAxis axis = roll_axis();
  axis.parameters[0] = -230;
  axis.proportional = axis.integral = 0.0;
  std::mt19937_64 engine(3);
  const ModelFit fit = fit_model(noisy_points(axis, exact_points(axis, false), false, engine),
                                 Structure::find(axis.structure));
  REQUIRE(fit.status == FitStatus::converged);
  const ParameterEstimate& gain = fit.parameter("effectiveness");
  CHECK(gain.low < gain.value);
  CHECK(gain.value < gain.high);
  CHECK(gain.high < 0.0);
  CHECK(gain.value == Approx(-230).epsilon(0.1));
  CHECK(mentions(fit, "reversed"));
}

TEST_CASE("model fit: what the points do not see is called not identifiable") {
  SECTION("damping far below the band") {
    SyntheticAxis axis = roll_axis();
    axis.parameters[1] = 0.02;
    axis.noise = 0.06;  // standard error of the damping some 0.2 1/s
    std::mt19937_64 engine(4);
    const ModelFit fit = fit_model(noisy_points(axis, exact_points(axis, false), false, engine),
                                   Structure::find(axis.structure));
    REQUIRE(fit.status == FitStatus::converged);
    CHECK_FALSE(fit.parameter("damping").identifiable);
    CHECK(fit.parameter("effectiveness").identifiable);
    CHECK(mentions(fit, "lies below the measured band"));
    CHECK(mentions(fit, "damping is not identifiable"));
  }
  SECTION("motor lag that is not there") {
    SyntheticAxis axis{"rate_damped", values({55, 0.8, 0.012}), 0.2, 0.2, false};
    axis.high_hz = 6.0;
    std::mt19937_64 engine(5);
    const ModelFit fit = fit_model(noisy_points(axis, exact_points(axis, false), false, engine),
                                   Structure::find("rate_motor_lag"));
    if (fit.status == FitStatus::converged) CHECK_FALSE(fit.parameter("motor_lag").identifiable);
    CHECK(fit.status != FitStatus::not_converged);
  }
  SECTION("nothing but noise") {
    SyntheticAxis axis = roll_axis();
    axis.noise = 20.0;
    std::mt19937_64 engine(6);
    const ModelFit fit = fit_model(noisy_points(axis, exact_points(axis, false), false, engine),
                                   Structure::find(axis.structure));
    CHECK(fit.status == FitStatus::not_supported);
    CHECK_FALSE(fit.reason.empty());
    CHECK_THROWS_AS(draw_parameters(fit, 10, 1), Failure);
    CHECK_THROWS_AS(response_band(fit, values({1.0})), Failure);
  }
  SECTION("too few points") {
    SyntheticAxis axis = roll_axis();
    axis.high_hz = 1.5;  // 6 points for 4 parameters
    const ModelFit fit = fit_model(exact_points(axis, false), Structure::find(axis.structure));
    CHECK(fit.status == FitStatus::not_supported);
    CHECK_THAT(fit.reason, Catch::Contains("6 points for 4 parameters"));
  }
  SECTION("noise from two windows") {
    FrequencyResponse points = exact_points(roll_axis(), false);
    points.degrees_of_freedom.setConstant(2.0);
    const ModelFit fit = fit_model(points, Structure::find("rate_motor_lag"));
    CHECK(fit.status == FitStatus::not_supported);
    CHECK_THAT(fit.reason, Catch::Contains("degrees of freedom"));
  }
}

TEST_CASE("model fit: a structure the axis does not have is not given as a success without a word") {
  SyntheticAxis axis = yaw_axis();
  axis.noise = 0.004;
  std::mt19937_64 engine(8);
  const FrequencyResponse points = noisy_points(axis, exact_points(axis, false), false, engine);
  const ModelFit fit = fit_model(points, Structure::find("rate_damped"));
  CHECK((fit.status == FitStatus::not_supported || mentions(fit, "the model misses the points")));
  CHECK(fit.reduced_chi_square > 2.0);
}

TEST_CASE("model fit: a delay at a corner of the cost or at its limit zero is found, not stalled at") {
  std::mt19937_64 engine(9);
  for (const double samples : {0.0, 0.5, 2.5, 3.5}) {
    SyntheticAxis axis = heave_axis();
    axis.noise = 0.08;  // delay known to about a fifth of a sample: many optima lie on a corner or at zero
    axis.parameters[3] = samples / axis.sample_rate_hz;
    const FrequencyResponse exact = exact_points(axis, false);
    for (int run = 0; run < 50; ++run) {
      const ModelFit fit =
          fit_model(noisy_points(axis, exact, false, engine), Structure::find(axis.structure));
      INFO(samples << " samples, run " << run << ": " << fit.reason);
      REQUIRE(fit.status == FitStatus::converged);
    }
  }
}

TEST_CASE("model fit: inconsistent or direct-only input is refused") {
  const Structure& roll = Structure::find("rate_motor_lag");
  const FrequencyResponse good = exact_points(roll_axis(), false);
  FrequencyResponse bad = good;
  bad.reference_based = false;
  CHECK_THROWS_WITH(fit_model(bad, roll), Catch::Contains("feedback biases"));
  bad = good;
  bad.b.conservativeResize(5);
  CHECK_THROWS_WITH(fit_model(bad, roll), Catch::Contains("different lengths"));
  bad = good;
  bad.frequency_hz[3] = bad.frequency_hz[2];
  CHECK_THROWS_WITH(fit_model(bad, roll), Catch::Contains("not positive and rising"));
  bad = good;
  bad.noise[4].ab *= 1.1;
  CHECK_THROWS_WITH(fit_model(bad, roll), Catch::Contains("not that of a noise"));
  bad = good;
  bad.a[1] = std::nan("");
  CHECK_THROWS_WITH(fit_model(bad, roll), Catch::Contains("not finite"));
  bad = good;
  bad.sample_rate_hz = 0.0;
  CHECK_THROWS_WITH(fit_cost(bad, roll, values({230, 2, 0.05, 0.008})), Catch::Contains("sample rate"));
  CHECK_THROWS_WITH(fit_model(good, roll).parameter("lag"), Catch::Contains("no parameter \"lag\""));
}

TEST_CASE("model fit: the interval widens with few degrees of freedom by q/(q-2) and with a large residual") {
  std::mt19937_64 engine(12);
  const SyntheticAxis axis = roll_axis();
  FrequencyResponse points = noisy_points(axis, exact_points(axis, false), false, engine);
  for (auto& noise : points.noise)
    noise = {noise.aa * 9, noise.bb * 9, noise.ab * 9.0};  // chi-square below one: no inflation
  const ModelFit known = fit_model(points, Structure::find(axis.structure));
  points.degrees_of_freedom.setConstant(10.0);
  const ModelFit estimated = fit_model(points, Structure::find(axis.structure));
  CHECK(estimated.covariance(0, 0) == Approx(known.covariance(0, 0) * 10.0 / 8.0).epsilon(1e-6));
  CHECK(estimated.reduced_chi_square == Approx(0.9 * known.reduced_chi_square).epsilon(1e-6));

  points.degrees_of_freedom.setConstant(std::numeric_limits<double>::infinity());
  for (auto& noise : points.noise)
    noise = {noise.aa / 81, noise.bb / 81, noise.ab / 81.0};  // nine times too optimistic
  const ModelFit optimistic = fit_model(points, Structure::find(axis.structure));
  CHECK(optimistic.reduced_chi_square == Approx(81 * known.reduced_chi_square).epsilon(1e-6));
  CHECK(mentions(optimistic, "the model misses the points"));
  // C/81 times chi²: the same points, so the truth of the interval is in their scatter.
  CHECK(optimistic.covariance(0, 0) ==
        Approx(known.covariance(0, 0) / 81 * optimistic.reduced_chi_square).epsilon(1e-6));
}
