// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/validation.h"

#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>

#include "ident/failure.h"
#include "ident/models/state_space.h"
#include "tests/ident/fitting/synthetic_axis.h"

using namespace hoverwright::ident;
using namespace hoverwright::tests;

namespace {

ModelFit exact_fit(const SyntheticAxis& axis) {
  ModelFit fit = fit_model(exact_points(axis, false), Structure::find(axis.structure));
  REQUIRE(fit.status == FitStatus::converged);
  for (std::size_t i = 0; i < fit.parameters.size(); ++i)
    fit.parameters[i].value = axis.parameters[static_cast<Eigen::Index>(i)];
  return fit;
}

/// A doublet of 0.3 s each way around a trim.
Eigen::VectorXd doublet(double trim, Eigen::Index samples) {
  Eigen::VectorXd demand = Eigen::VectorXd::Constant(samples, trim);
  demand.segment(400, 120).array() += 0.1;
  demand.segment(520, 120).array() -= 0.1;
  return demand;
}

/// Motion of the axis at rate/20: states integrated in small Euler-free steps by the undelayed model at 20
/// times the rate, the delay as whole small steps. Independent of the fractional-delay code up to the
/// rounding of the delay, which is exact here.
Eigen::VectorXd motion(const SyntheticAxis& axis, const Eigen::VectorXd& demand) {
  constexpr Eigen::Index kFine = 20;
  StateSpace model = state_space(Structure::find(axis.structure).transfer_function(axis.parameters));
  const double fine_hz = kFine * axis.sample_rate_hz;
  const auto late = static_cast<Eigen::Index>(std::lround(model.input_delay_s * fine_hz)) - kFine / 2;
  model.input_delay_s = 0.0;
  const SampledStateSpace fine = sample_with_hold(model, fine_hz);
  Eigen::VectorXd held(demand.size() * kFine);
  for (Eigen::Index i = 0; i < held.size(); ++i) held[i] = i < late ? demand[0] : demand[(i - late) / kFine];
  const Eigen::VectorXd output = simulate(fine, held);
  return output(Eigen::seqN(0, demand.size(), kFine));
}

}  // namespace

TEST_CASE(
    "validation: the true model explains a doublet around a trim, with bias, drift and motion from before") {
  for (SyntheticAxis axis : {roll_axis(), yaw_axis(), heave_axis()}) {
    INFO(axis.structure);
    axis.parameters.tail(1)[0] = 66.0 / 8000.0;  // 8.25 ms: whole fine steps, a fraction of a sample
    const Eigen::VectorXd demand = doublet(0.3, 2000);
    const Eigen::VectorXd t = Eigen::VectorXd::LinSpaced(2000, 0.0, 1999.0 / 400.0);
    Eigen::VectorXd output = motion(axis, demand);
    const double size = output.cwiseAbs().maxCoeff();
    output.array() += 0.2 * size + 0.05 * size * t.array() +
                      0.1 * size * (-t.array() / axis.parameters[2]).exp() -
                      0.1 * size * (-axis.parameters[1] * t.array()).exp();
    const ValidationResult result = validate(exact_fit(axis), demand, output);
    // Bias, drift and both free responses lie in the fitted columns: only rounding is left (slow columns
    // nearly alike).
    CHECK(result.fit_percent > 100.0 - 1e-4);
    CHECK(result.theil_inequality < 1e-6);
    CHECK(result.time_s[1999] == Approx(1999.0 / 400.0));
    CHECK(std::abs(result.measured.mean()) < 1e-9 * size);
  }
}

TEST_CASE("validation: noise lowers the fit by what it is, a wrong delay or gain shows") {
  SyntheticAxis axis = roll_axis();
  axis.parameters[3] = 66.0 / 8000.0;
  const Eigen::VectorXd demand = doublet(0.0, 2000);
  const Eigen::VectorXd clean = motion(axis, demand);
  const double deviation = (clean.array() - clean.mean()).matrix().norm() / std::sqrt(2000.0);
  std::mt19937_64 engine(2);
  std::normal_distribution<double> normal(0.0, 0.1 * deviation);
  Eigen::VectorXd noisy = clean;
  for (double& value : noisy) value += normal(engine);
  const ModelFit fit = exact_fit(axis);
  const ValidationResult result = validate(fit, demand, noisy);
  // |noise| / |signal + noise| = 0.1 / sqrt(1.01), sampled over 2000: 1.6 % of 0.1; four fitted columns take
  // 0.1 %.
  CHECK(result.fit_percent == Approx(100.0 * (1.0 - 0.0995)).margin(0.6));
  CHECK(result.theil_inequality == Approx(0.05).margin(0.004));

  ModelFit wrong = fit;
  wrong.parameters[0].value *= 0.5;
  CHECK(validate(wrong, demand, clean).fit_percent < 70.0);
  wrong = fit;
  wrong.parameters[3].value += 0.03;
  CHECK(validate(wrong, demand, clean).fit_percent < 95.0);
}

TEST_CASE("validation: a delay shorter than the hold's half sample is simulated too") {
  SyntheticAxis axis = heave_axis();
  axis.parameters[3] = 6.0 / 8000.0;  // 0.75 ms, half a sample is 1.25 ms
  const Eigen::VectorXd demand = doublet(0.0, 1500);
  // The output 0.5 ms ahead: the motion 3.0 fine steps earlier, from a demand moved by whole samples.
  SyntheticAxis late = axis;
  late.parameters[3] += 1.0 / 400.0;
  Eigen::VectorXd moved = demand;
  moved.head(1499) = demand.tail(1499);
  const ValidationResult result =
      validate(exact_fit(axis), demand.head(1400), motion(late, moved).head(1400));
  CHECK(result.fit_percent > 100.0 - 1e-4);
}

TEST_CASE("validation: what cannot be compared is refused") {
  const ModelFit fit = exact_fit(roll_axis());
  const Eigen::VectorXd demand = doublet(0.0, 700);
  CHECK_THROWS_WITH(validate(fit, demand, demand.head(600)),
                    Catch::Contains("700 demand samples, 600 output samples"));
  CHECK_THROWS_WITH(validate(fit, demand.head(5), demand.head(5)), Catch::Contains("at least"));
  CHECK_THROWS_WITH(validate(fit, demand, Eigen::VectorXd::Zero(700)), Catch::Contains("does not move"));
  Eigen::VectorXd gap = demand;
  gap[3] = std::nan("");
  CHECK_THROWS_WITH(validate(fit, gap, demand), Catch::Contains("not finite"));
  ModelFit failed = fit;
  failed.status = FitStatus::not_converged;
  failed.reason = "the optimiser stopped";
  CHECK_THROWS_WITH(validate(failed, demand, demand), Catch::Contains("the optimiser stopped"));
}
