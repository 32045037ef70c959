// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <string>
#include <vector>

#include "reports/html_text.h"
#include "reports/response_view.h"
#include "reports/result_files.h"

// The words of the report, made from the numbers: each sentence says what a picture shows and what to do
// next. Plain text, not escaped.

namespace hoverwright::reports {

/// What an axis puts out, for screens: "roll rate" in "rad/s".
struct OutputWords {
  std::string quantity;
  std::string unit;
};
OutputWords output_words(ident::Axis axis, const AxisResult& result);

/// "Roll" for roll.
std::string axis_title(ident::Axis axis);

/// Gain of the response counts as known where its 95 % limits lie within this distance (common practice).
inline constexpr double kKnownWithinDb = 3.0;
/// Coherence below this is called low (common practice).
inline constexpr double kUsefulCoherence = 0.6;

std::string gain_sentence(const AxisResult& result, const ResponseView& view);
std::string phase_sentence(ident::Axis axis, const AxisResult& result, const ResponseView& view);
std::string coherence_sentence(const AxisResult& result);
std::string model_sentence(const ident::ModelFit& fit);
std::string validation_sentence(const ident::ValidationResult& record, std::size_t number);

/// How the residual compares with what the noise allows, from the reduced chi-square X and its degrees of
/// freedom n: as_expected within three standard deviations sqrt(2/n) of 1.
enum class ResidualVerdict { as_expected, larger, much_larger, smaller };
ResidualVerdict judge_residual(const ident::ModelFit& fit);

/// "roll rate" for roll_rate.
std::string loop_words(ident::Loop loop);

/// Points whose 95 % region is unbounded.
int unbounded_points(const ResponseView& view);

/// Warnings the page adds to those of the commands: direct-only responses, unsupported numbers, present gains
/// that fail.
std::vector<std::string> page_warnings(const IdentifyResult& identified,
                                       const std::optional<GainsResult>& gains);

/// Steps to which margins are shown: 0.1 dB, 0.1°, 0.01. An optimum lies on its requirement, so margins are
/// compared as shown.
struct MarginResolution {
  double gain_db = 0.1, phase_deg = 0.1, peak = 0.01;
};
inline constexpr MarginResolution kMarginResolution{};

/// Whether the margins meet the requirements: nominal values (where a crossing exists), and the stated share
/// of draws.
bool meets(const ident::MarginRanges& margins, const ident::GainRequirements& requirements);

/// "from 0.4 to 18 Hz".
std::string band_words(const FrequencyBand& band);

}  // namespace hoverwright::reports
