// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/flight_variation.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <random>

#include "ident/fitting/model_fit.h"
#include "tests/ident/fitting/synthetic_axis.h"

using namespace hoverwright::ident;
using namespace hoverwright::tests;

namespace {

constexpr int kStretches = 10;  // two records of five

/// A sweep in two records of five stretches: each stretch holds its fifth of the lines (with a skirt over its
/// neighbours), its own share of the noise, and an axis whose gain is off by `wander` (relative, standard
/// deviation) for that stretch.
FrequencyResponse flight(const SyntheticAxis& axis, const FrequencyResponse& exact, double wander,
                         std::mt19937_64& engine) {
  std::normal_distribution<double> normal;
  FrequencyResponse points = exact;
  const Eigen::Index count = exact.points();
  points.a.setZero();
  points.b.setZero();
  points.degrees_of_freedom.setConstant(1e6);
  const Eigen::VectorXcd h = exact.a.cwiseQuotient(exact.b);
  for (int i = 0; i < kStretches; ++i) {
    ResponseStretch stretch{1 + i / 5, Eigen::VectorXcd::Zero(count), Eigen::VectorXcd::Zero(count)};
    const double gain = 1.0 + wander * normal(engine);
    const double centre = (0.5 + i % 5) / 5.0;
    for (Eigen::Index k = 0; k < count; ++k) {
      const double place =
          std::log(exact.frequency_hz[k] / axis.low_hz) / std::log(axis.high_hz / axis.low_hz);
      const auto hat = [&](double middle) { return std::max(0.0, 1.0 - 5.0 * std::abs(place - middle)); };
      double total = 0.0;
      for (int j = 0; j < 5; ++j) total += 2.0 * hat((0.5 + j) / 5.0);
      const double part = total > 0.0 ? hat(centre) / total : 0.0;
      const double deviation = std::sqrt(0.5 * part * exact.noise[static_cast<std::size_t>(k)].aa);
      const double re = normal(engine);
      const std::complex<double> noise = deviation * std::complex<double>(re, normal(engine));
      stretch.a[k] = part * exact.a[k] * gain + noise;
      stretch.b[k] = part * exact.b[k] - axis.controller(exact.frequency_hz[k]) * noise;
    }
    points.a += stretch.a;
    points.b += stretch.b;
    points.stretches.push_back(stretch);
  }
  return points;
}

struct Study {
  double mean_inflation = 0.0;
  double coverage = 0.0;  ///< of effectiveness
};

Study study(double wander, int flights, bool split) {
  const SyntheticAxis axis = roll_axis();
  const FrequencyResponse exact = exact_points(axis, false);
  std::mt19937_64 engine(11);
  Study result;
  for (int i = 0; i < flights; ++i) {
    FrequencyResponse points = flight(axis, exact, wander, engine);
    if (!split) points.stretches.clear();
    const ModelFit fit = fit_model(points, Structure::find(axis.structure));
    REQUIRE(fit.status == FitStatus::converged);
    const ParameterEstimate& gain = fit.parameter("effectiveness");
    result.mean_inflation += fit.flight_variation / flights;
    result.coverage +=
        (gain.low <= axis.parameters[0] && axis.parameters[0] <= gain.high ? 1.0 : 0.0) / flights;
  }
  return result;
}

}  // namespace

// 200 flights each. Coverage of a 95 % interval in 200 flights: 95 % - 3 · 1.54 % = 90.4 %.
TEST_CASE("flight variation: a steady vehicle keeps its intervals") {
  const Study steady = study(0.0, 200, true);
  INFO("inflation " << steady.mean_inflation << ", coverage " << steady.coverage);
  CHECK(steady.coverage >= 0.904);
  // The estimate itself spreads by about sqrt(2/ν) with ν near 10, and is kept at 1 or above: its mean is
  // below 1.4.
  CHECK(steady.mean_inflation < 1.4);
}

// The hardest case for one number that serves all parameters: only the gain wanders, 5 % from stretch to
// stretch, so the other parameters' directions dilute it. Measured: 83 % with the stretches, 62 % without
// (standard errors 2.7 and 3.4 %).
TEST_CASE("flight variation: a wandering gain gets intervals that hold it far more often") {
  const Study blind = study(0.05, 200, false);
  const Study wandering = study(0.05, 200, true);
  WARN("wandering gain: inflation " << wandering.mean_inflation << ", coverage " << wandering.coverage << ", "
                                    << blind.coverage << " without the stretches");
  CHECK(wandering.mean_inflation > 2.0);
  CHECK(wandering.coverage >= 0.75);
  CHECK(wandering.coverage > blind.coverage + 0.2);
}

TEST_CASE("flight variation: says nothing where the estimate is not split in time") {
  const SyntheticAxis axis = roll_axis();
  const FrequencyResponse exact = exact_points(axis, false);
  std::mt19937_64 engine(3);
  FrequencyResponse points = flight(axis, exact, 0.2, engine);
  points.stretches.clear();
  CHECK(fit_model(points, Structure::find(axis.structure)).flight_variation == 1.0);
}
