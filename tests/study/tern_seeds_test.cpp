// SPDX-License-Identifier: GPL-3.0-or-later
// The whole chain over 20 seeds of gusts and sensor noise, judged against the airframe's own linear
// parameters.
#include <fmt/format.h>

#include <catch2/catch.hpp>
#include <cmath>
#include <iostream>
#include <map>
#include <set>
#include <string>

#include "excitation/rehearsal/truth.h"
#include "ident/loops/cascade.h"
#include "tests/study/tern_flight.h"

using namespace hoverwright;
using namespace hoverwright::ident;
using namespace hoverwright::tests;

namespace {

constexpr int kSeeds = 20;

Eigen::VectorXd dense_grid(double low_hz, double high_hz, Eigen::Index points) {
  Eigen::VectorXd grid(points);
  for (Eigen::Index i = 0; i < points; ++i) {
    grid(i) = low_hz * std::pow(high_hz / low_hz, static_cast<double>(i) / static_cast<double>(points - 1));
  }
  return grid;
}

/// Share of true parameters inside their intervals, per axis and parameter.
struct Coverage {
  std::map<std::string, int> inside, visible;
  int total_inside = 0, total = 0;
  double worst_effectiveness = 0.0;
};

/// Linear parameters in the steady wind the flight is flown in; leaning into it changes effectiveness by
/// about 1 %.
excitation::AxisTruth true_axis(const Vehicle& vehicle, Axis axis) {
  return excitation::axis_truth(vehicle, axis, vehicle.airframe->weather.wind_m_s);
}

void count_coverage(const Vehicle& vehicle, const reports::IdentifyResult& identified, Coverage& coverage) {
  for (const Axis axis : kAxes) {
    const excitation::AxisTruth truth = true_axis(vehicle, axis);
    const auto& found = identified.axes.at(axis);
    INFO(axis_name(axis) << ": " << found.no_model_reason);
    REQUIRE(found.model);
    for (const auto& [name, value] : truth.parameters) {
      const ParameterEstimate& estimate = found.model->parameter(name);
      if (name == "damping" && !estimate.identifiable) continue;
      const std::string label = fmt::format("{} {}", axis_name(axis), name);
      const bool inside = estimate.low <= value && value <= estimate.high;
      ++coverage.visible[label];
      coverage.inside[label] += inside ? 1 : 0;
      ++coverage.total;
      coverage.total_inside += inside ? 1 : 0;
      if (name == "effectiveness") {
        coverage.worst_effectiveness =
            std::max(coverage.worst_effectiveness, std::abs(estimate.value / value - 1.0));
      }
    }
  }
}

/// Smallest margins of the proposed rate and angle loops on the true linear axis.
struct TrueMargins {
  double gain_db = 1e9, phase_deg = 1e9;
  int loops = 0;
};

void judge_gains(const Vehicle& vehicle, const reports::GainsResult& gains, std::uint64_t seed,
                 TrueMargins& worst) {
  const LoopGainSet flown = recommended_gain_set(vehicle, gains);
  const Eigen::VectorXd grid = dense_grid(0.01, 100.0, 4000);
  for (const Axis axis : {Axis::roll, Axis::pitch, Axis::yaw}) {
    const excitation::AxisTruth truth = true_axis(vehicle, axis);
    const Structure& structure = Structure::find(truth.structure);
    Eigen::VectorXd parameters(static_cast<Eigen::Index>(structure.parameters().size()));
    for (const auto& [name, value] : truth.parameters) parameters(structure.index_of(name)) = value;
    CascadeSetup setup;
    setup.axis = axis;
    setup.sample_rate_hz = vehicle.control.sample_rate_hz;
    setup.gyro_filter_hz = vehicle.control.gyro_filter_hz;
    setup.speed_damping_1_s = vehicle.speed_damping_1_s.value_or(0.0);
    const CascadeAnalysis analysis = analyse_cascade(setup, flown, structure, parameters, grid);
    for (const LoopRecommendation& loop : gains.axes.at(axis).loops) {
      if (!loop.recommended) continue;
      const Margins& margins = analysis.loops.at(loop.loop);
      INFO("seed " << seed << ", " << loop_name(loop.loop));
      CHECK(margins.stable);
      REQUIRE(margins.gain_margin_db);
      REQUIRE(margins.phase_margin_deg);
      CHECK(*margins.gain_margin_db >= 6.0);
      CHECK(*margins.phase_margin_deg >= 45.0);
      worst.gain_db = std::min(worst.gain_db, *margins.gain_margin_db);
      worst.phase_deg = std::min(worst.phase_deg, *margins.phase_margin_deg);
      ++worst.loops;
    }
  }
}

}  // namespace

// 20 flights of the default schedule; run time about two minutes. Bound on coverage: the 90 %.
TEST_CASE("Tern over 20 seeds: intervals hold the airframe's parameters and the proposed gains fly",
          "[study]") {
  const Vehicle vehicle = tern();
  const excitation::Schedule schedule = excitation::plan_schedule(vehicle, {});
  Coverage coverage;
  TrueMargins margins;
  double hover_before = 0.0;
  double hover_after = 0.0;
  for (std::uint64_t seed = 1; seed <= kSeeds; ++seed) {
    INFO("seed " << seed);
    excitation::RehearsalOptions flight;
    flight.seed = seed;
    const excitation::RehearsalResult flown = excitation::rehearse(vehicle, schedule, flight);
    CHECK_FALSE(flown.excursions.diverged);
    CHECK(flown.excursions.exceeded.empty());
    const reports::IdentifyResult identified = identify_flight(flight_data(flown.log), vehicle, {});
    count_coverage(vehicle, identified, coverage);

    const reports::GainsResult gains = recommend_gains(identified, vehicle, {});
    judge_gains(vehicle, gains, seed, margins);
    Vehicle retuned = vehicle;
    retuned.loops = recommended_gain_set(vehicle, gains);
    flight.seed = seed + 1000;  // another day's gusts
    const excitation::RehearsalResult before =
        excitation::rehearse(vehicle, quiet_schedule(vehicle, 60.0), flight);
    const excitation::RehearsalResult after =
        excitation::rehearse(retuned, quiet_schedule(vehicle, 60.0), flight);
    CHECK_FALSE(after.excursions.diverged);
    CHECK(after.excursions.exceeded.empty());
    hover_before += before.excursions.drift_m / kSeeds;
    hover_after += after.excursions.drift_m / kSeeds;
  }
  for (const auto& [label, visible] : coverage.visible) {
    std::cout << fmt::format("  {:<22} {:>2} of {:>2} inside\n", label, coverage.inside[label], visible);
  }
  std::cout << fmt::format(
      "Tern, {} seeds: {} of {} true parameters inside their 95 % intervals ({:.1f} %), effectiveness off by "
      "at most {:.2f} %,\n"
      "  proposed gains on the true axes: gain margin >= {:.2f} dB, phase margin >= {:.2f} deg over {} "
      "loops,\n"
      "  largest drift hovering 60 s in gusts, mean over seeds: {:.2f} m with the present gains, {:.2f} m "
      "with the proposed ones\n",
      kSeeds, coverage.total_inside, coverage.total, 100.0 * coverage.total_inside / coverage.total,
      100.0 * coverage.worst_effectiveness, margins.gain_db, margins.phase_deg, margins.loops, hover_before,
      hover_after);
  CHECK(coverage.total_inside >= 0.9 * coverage.total);
  CHECK(coverage.worst_effectiveness <= 0.08);
  // Every rate and angle (heading) loop of roll, pitch and yaw must have been tuned in every seed.
  CHECK(margins.loops == kSeeds * 6);
}
