// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/drawn_models.h"

#include <fmt/format.h>
#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>

#include "ident/failure.h"

namespace hoverwright::ident {
namespace {

constexpr double kLowestHz = 0.005;
constexpr int kGridPoints = 400;
constexpr double kShareOfNyquist = 0.98;  // the gyro filter is exactly zero at half the sample rate

/// Value below which `share` of the sorted values lie, linear between neighbours.
double quantile(const std::vector<double>& sorted, double share) {
  const double at = share * static_cast<double>(sorted.size() - 1);
  const auto low = static_cast<std::size_t>(at);
  const std::size_t high = std::min(low + 1, sorted.size() - 1);
  return sorted[low] + (at - static_cast<double>(low)) * (sorted[high] - sorted[low]);
}

/// Nominal and central 95 % of the draws that have the value; absent where the nominal has none.
template <typename Value>
std::optional<Range> range_of(const std::vector<Margins>& margins, Value value) {
  const std::optional<double> nominal = value(margins.front());
  if (!nominal) return std::nullopt;
  std::vector<double> drawn;
  for (std::size_t i = 1; i < margins.size(); ++i) {
    if (const std::optional<double> one = value(margins[i])) drawn.push_back(*one);
  }
  if (drawn.empty()) return Range{*nominal, *nominal, *nominal};
  std::sort(drawn.begin(), drawn.end());
  return Range{*nominal, quantile(drawn, 0.025), quantile(drawn, 0.975)};
}

}  // namespace

Eigen::VectorXd margin_grid(double sample_rate_hz, double band_high_hz) {
  const double highest = kShareOfNyquist * sample_rate_hz / 2.0;
  std::vector<double> grid;
  for (int k = 0; k < kGridPoints; ++k)
    grid.push_back(kLowestHz * std::pow(highest / kLowestHz, static_cast<double>(k) / (kGridPoints - 1)));
  if (band_high_hz > kLowestHz && band_high_hz < highest) {
    const auto place = std::lower_bound(grid.begin(), grid.end(), band_high_hz);
    if (*place != band_high_hz) grid.insert(place, band_high_hz);
  }
  return Eigen::Map<const Eigen::VectorXd>(grid.data(), static_cast<Eigen::Index>(grid.size()));
}

DrawnModels draw_models(const CascadeSetup& setup, const ModelFit& fit, int draws, std::uint64_t seed) {
  const Structure& structure = Structure::find(fit.structure);
  const Eigen::VectorXd nominal = fit.values();
  const Eigen::MatrixXd drawn = draw_parameters(fit, draws, seed);
  const Eigen::Index delay = structure.index_of("delay"), damping = structure.index_of("damping");

  DrawnModels models;
  models.frequency_hz = margin_grid(setup.sample_rate_hz, fit.band_high_hz);
  models.gyro_filter = gyro_filter_response(setup, models.frequency_hz);
  std::vector<Eigen::VectorXd> kept{nominal};
  for (Eigen::Index i = 0; i < drawn.rows(); ++i) {
    if (drawn(i, delay) * setup.sample_rate_hz < 0.5) {
      ++models.left_out;
    } else {
      kept.emplace_back(drawn.row(i).transpose());
    }
  }
  if (2 * models.left_out > draws)
    throw Failure(
        FailureKind::unsupported,
        fmt::format(
            "{} axis: {} of {} draws of the model have a delay below the half sample any held demand has",
            axis_name(setup.axis), models.left_out, draws),
        "", "fly a longer excitation that reaches higher frequencies, so that the delay is known");
  models.plants.resize(kept.size());
  models.responses.resize(kept.size());
  const Eigen::Index effectiveness = structure.index_of("effectiveness");
  for (const Eigen::VectorXd& parameters : kept) {
    models.effectiveness.push_back(parameters[effectiveness]);
    models.open_loop_stable.push_back(parameters[damping] > 0.0);
  }
  tbb::parallel_for(std::size_t{0}, kept.size(), [&](std::size_t i) {
    models.plants[i] = cascade_plant(setup, structure, kept[i]);
    models.responses[i] = plant_responses(models.plants[i], models.frequency_hz);
  });
  return models;
}

std::vector<CascadeAnalysis> analyse_models(const CascadeSetup& setup, const DrawnModels& models,
                                            const std::vector<LoopGains>& gains) {
  const std::vector<Loop> loops = loops_of_axis(setup.axis);
  std::vector<ControllerResponse> controllers;
  for (std::size_t i = 0; i < gains.size(); ++i)
    controllers.push_back(controller_response(gains[i], setup.sample_rate_hz, output_factor(setup.axis, i),
                                              models.frequency_hz));
  std::vector<CascadeAnalysis> analyses(models.plants.size());
  tbb::parallel_for(std::size_t{0}, models.plants.size(), [&](std::size_t m) {
    const CascadeGains open = cascade_gains(models.responses[m], models.gyro_filter, controllers);
    bool stable = false;
    for (std::size_t i = 0; i < gains.size(); ++i) {
      stable = spectral_radius(setup, models.plants[m], gains, i + 1) < 1.0;
      analyses[m].loops[loops[i]] = read_margins(models.frequency_hz, open.loops[i], stable);
    }
    analyses[m].at_demand = read_margins(models.frequency_hz, open.demand, stable);
  });
  return analyses;
}

bool meets(const Margins& margins, const GainRequirements& requirements) {
  const auto at_least = [](const std::optional<double>& value, double limit) {
    return !value || *value >= limit;
  };
  return margins.stable && at_least(margins.gain_margin_db, requirements.gain_margin_db) &&
         at_least(margins.gain_reduction_db, requirements.gain_margin_db) &&
         at_least(margins.phase_margin_deg, requirements.phase_margin_deg) &&
         margins.sensitivity_peak <= requirements.sensitivity_peak;
}

MarginRanges margin_ranges(const std::vector<Margins>& margins, const GainRequirements& requirements) {
  MarginRanges ranges;
  ranges.gain_margin_db = range_of(margins, [](const Margins& m) { return m.gain_margin_db; });
  ranges.phase_margin_deg = range_of(margins, [](const Margins& m) { return m.phase_margin_deg; });
  ranges.sensitivity_peak =
      range_of(margins, [](const Margins& m) { return std::optional(m.sensitivity_peak); });
  ranges.crossover_hz = range_of(margins, [](const Margins& m) { return m.crossover_hz; });
  const std::size_t draws = margins.size() - 1;
  if (draws == 0) return ranges;
  const auto share = [&](auto holds) {
    return static_cast<double>(std::count_if(margins.begin() + 1, margins.end(), holds)) /
           static_cast<double>(draws);
  };
  ranges.stable_share = share([](const Margins& m) { return m.stable; });
  ranges.meets_share = share([&](const Margins& m) { return meets(m, requirements); });
  return ranges;
}

}  // namespace hoverwright::ident
