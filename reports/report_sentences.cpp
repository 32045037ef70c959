// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/report_sentences.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace hoverwright::reports {
namespace {

using Eigen::Index;

// Phase a loop still has in hand when its crossover lies where the plant has this phase and the controller
// adds none.
constexpr double kCautionPhaseDeg = -135.0;
constexpr double kLimitPhaseDeg = -180.0;

// Fit of a record the model never saw; common practice for hovering craft flown in wind.
constexpr double kGoodFitPercent = 70.0;
constexpr double kUsableFitPercent = 40.0;

/// Lowest frequency at which the phase falls through `level_deg`, by interpolation over log frequency.
std::optional<double> falls_through(const Eigen::VectorXd& frequency_hz, const Eigen::VectorXd& phase_deg,
                                    double level_deg) {
  for (Index k = 1; k < phase_deg.size(); ++k) {
    if (!(phase_deg(k - 1) > level_deg && phase_deg(k) <= level_deg)) continue;
    const double share = (phase_deg(k - 1) - level_deg) / (phase_deg(k - 1) - phase_deg(k));
    return frequency_hz(k - 1) * std::pow(frequency_hz(k) / frequency_hz(k - 1), share);
  }
  return std::nullopt;
}

/// The point whose gain is known best.
std::optional<Index> best_point(const ResponseView& view) {
  std::optional<Index> best;
  double smallest = 0.0;
  for (Index k = 0; k < view.gain_db.size(); ++k) {
    const std::optional<double> width = gain_half_width_db(view, k);
    if (!width || !std::isfinite(*width) || (best && *width >= smallest)) continue;
    best = k;
    smallest = *width;
  }
  return best;
}

}  // namespace

OutputWords output_words(ident::Axis axis, const AxisResult& result) {
  if (axis != ident::Axis::heave) return {fmt::format("{} rate", ident::axis_name(axis)), "rad/s"};
  if (result.model && result.model->structure == "climb_rate") return {"climb rate", "m/s"};
  return {"upward acceleration", "m/s\u00b2"};
}

std::string axis_title(ident::Axis axis) {
  std::string title(ident::axis_name(axis));
  title.front() = static_cast<char>(title.front() - 'a' + 'A');  // the four names are plain lower case
  return title;
}

std::string loop_words(ident::Loop loop) {
  std::string words(ident::loop_name(loop));
  std::replace(words.begin(), words.end(), '_', ' ');
  return words;
}

std::string band_words(const FrequencyBand& band) {
  return fmt::format("from {} to {} Hz", shown(band.low_hz, 2), shown(band.high_hz, 2));
}

int unbounded_points(const ResponseView& view) {
  return static_cast<int>(std::count_if(view.limits.begin(), view.limits.end(),
                                        [](const PointLimits& point) { return !point.bounded; }));
}

std::string gain_sentence(const AxisResult& result, const ResponseView& view) {
  const std::optional<FrequencyBand> band =
      band_known_within(view, result.response.frequency_hz, kKnownWithinDb);
  if (!result.response.reference_based) {
    return "Gain of the direct estimate: its bars count noise only, feedback shifts the points by more than "
           "they show, so read no "
           "gain from it; log the excitation on the next flight.";
  }
  if (!band) {
    return fmt::format(
        "The gain is nowhere known within {:.0f} dB over a band; fly a longer or larger sweep before using "
        "it.",
        kKnownWithinDb);
  }
  std::string best;
  if (const std::optional<Index> k = best_point(view)) {
    best = fmt::format(" (best: within {} dB at {} Hz)", shown(*gain_half_width_db(view, *k), 2),
                       shown(result.response.frequency_hz(*k), 2));
  }
  return fmt::format(
      "Gain is known within {:.0f} dB {}{}; decide from that band, and fly longer or larger sweeps if you "
      "need what lies outside it.",
      kKnownWithinDb, band_words(*band), best);
}

std::string phase_sentence(ident::Axis axis, const AxisResult& result, const ResponseView& view) {
  if (!result.response.reference_based) {
    return "Phase of the direct estimate: where gusts drive the loop it turns towards the controller's "
           "inverse, so judge no lag or delay "
           "from it; log the excitation on the next flight.";
  }
  const bool acceleration = axis == ident::Axis::heave && output_words(axis, result).unit != "m/s";
  const double shift =
      acceleration ? 90.0 : 0.0;  // an integration still lies between acceleration and climb rate
  Eigen::VectorXd frequency = result.response.frequency_hz;
  Eigen::VectorXd phase = view.phase_deg;
  if (result.model) {
    const ident::ModelFit& fit = *result.model;
    constexpr Index kGrid = 400;
    frequency = Eigen::VectorXd::LinSpaced(kGrid, std::log(fit.band_low_hz), std::log(fit.band_high_hz))
                    .array()
                    .exp();
    phase = ident::response_band(fit, frequency).phase_deg;
  }
  const std::string who = result.model ? "the model's phase" : "the measured phase";
  const std::string extra = acceleration ? ", the 90\u00b0 from acceleration to climb rate included," : "";
  const auto caution = falls_through(frequency, phase, kCautionPhaseDeg + shift);
  const auto limit = falls_through(frequency, phase, kLimitPhaseDeg + shift);
  if (!caution) {
    return fmt::format(
        "Within the measured band {}{} stays above \u2212135\u00b0, so lag does not limit the inner loop "
        "here; what "
        "limits it lies above {} Hz.",
        who, extra, shown(frequency(frequency.size() - 1), 2));
  }
  const std::string second = limit ? fmt::format(" and \u2212180\u00b0 at {} Hz", shown(*limit, 2)) : "";
  return fmt::format(
      "Before filters and controller {}{} passes \u2212135\u00b0 at {} Hz{}; a proportional inner loop keeps "
      "45\u00b0 "
      "only while it crosses over below the first, so look there when gains go up.",
      who, extra, shown(*caution, 2), second);
}

std::string coherence_sentence(const AxisResult& result) {
  const ident::FrequencyResponse& response = result.response;
  const bool reference = response.reference_based && response.coherence_ry.size() > 0;
  const Eigen::VectorXd& shown_coherence = reference ? response.coherence_ry : response.coherence_uy;
  const std::optional<FrequencyBand> band =
      band_above(shown_coherence, response.frequency_hz, kUsefulCoherence);
  const std::string pair = reference ? "excitation to output" : "demand to output";
  const std::string blind = " (coherence does not reveal feedback bias).";
  if (!band) {
    return fmt::format("Coherence {} is below {:.1f} nearly everywhere: noise outweighs the motion; {}{}",
                       pair, kUsefulCoherence,
                       reference ? "excite more, or fly in calmer air" : "fly a designed excitation", blind);
  }
  return fmt::format("Coherence {} is above {:.1f} {}; {}{}", pair, kUsefulCoherence, band_words(*band),
                     reference
                         ? "where it drops, gusts outweigh the sweep and more amplitude or time there pays"
                         : "only there do the logs carry information on this axis",
                     blind);
}

ResidualVerdict judge_residual(const ident::ModelFit& fit) {
  // A reduced chi-square has standard deviation sqrt(2/n); twice the noise is more than any noise estimate is
  // off by.
  const double spread = 3.0 * std::sqrt(2.0 / fit.residual_degrees_of_freedom);
  if (fit.reduced_chi_square > std::max(2.0, 1.0 + spread)) return ResidualVerdict::much_larger;
  if (fit.reduced_chi_square > 1.0 + spread) return ResidualVerdict::larger;
  if (fit.reduced_chi_square < 1.0 - spread) return ResidualVerdict::smaller;
  return ResidualVerdict::as_expected;
}

std::string model_sentence(const ident::ModelFit& fit) {
  const std::string residual = shown(fit.reduced_chi_square, 3);
  switch (judge_residual(fit)) {
    case ResidualVerdict::as_expected:
      return fmt::format(
          "The model leaves {} times the residual the noise accounts for (reduced chi-square; 1 is ideal): "
          "it explains the "
          "points as well as they are known, so use it inside its band.",
          residual);
    case ResidualVerdict::larger:
      return fmt::format(
          "The model leaves {} times the residual the noise accounts for (reduced chi-square; 1 is ideal): "
          "something small is "
          "missing from it; the intervals are widened for that, so check where points leave the line.",
          residual);
    case ResidualVerdict::much_larger:
      return fmt::format(
          "The model leaves {} times the residual the noise accounts for (reduced chi-square; 1 is ideal): "
          "the structure misses "
          "dynamics that the flight shows; try another structure before trusting gains from it.",
          residual);
    case ResidualVerdict::smaller:
      break;
  }
  return fmt::format(
      "The model leaves {} times the residual the noise accounts for (reduced chi-square; 1 is ideal): the "
      "noise was taken for "
      "larger than it is, so the intervals are on the wide side and safe to use.",
      residual);
}

std::string validation_sentence(const ident::ValidationResult& record, std::size_t number) {
  const std::string head = fmt::format(
      "Record {}, which the fit never saw: the model reproduces {} % of the motion (Theil coefficient {}; 0 "
      "exact, 1 useless)",
      number, shown_fixed(record.fit_percent, 0), shown_fixed(record.theil_inequality, 2));
  if (record.fit_percent >= kGoodFitPercent) return head + "; it may be used for tuning.";
  if (record.fit_percent >= kUsableFitPercent) {
    return head + "; gusts or missing dynamics make up the rest, so compare shape and timing before tuning.";
  }
  return head + "; do not tune from this model until a calmer or larger validation record agrees with it.";
}

bool meets(const ident::MarginRanges& margins, const ident::GainRequirements& requirements) {
  const auto at_least = [](const std::optional<ident::Range>& range, double required, double resolution) {
    return !range || range->nominal >= required - resolution / 2.0;
  };
  const bool nominal =
      at_least(margins.gain_margin_db, requirements.gain_margin_db, kMarginResolution.gain_db) &&
      at_least(margins.phase_margin_deg, requirements.phase_margin_deg, kMarginResolution.phase_deg) &&
      (!margins.sensitivity_peak ||
       margins.sensitivity_peak->nominal <= requirements.sensitivity_peak + kMarginResolution.peak / 2.0);
  return nominal && margins.stable_share >= requirements.share_of_draws &&
         margins.meets_share >= requirements.share_of_draws;
}

}  // namespace hoverwright::reports
