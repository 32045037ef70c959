// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include <algorithm>

#include "reports/html_text.h"
#include "reports/report_sentences.h"

namespace hoverwright::reports {
namespace {

void warn_of_responses(const IdentifyResult& identified, std::vector<std::string>& warnings) {
  std::string unbounded;
  for (const auto& [axis, result] : identified.axes) {
    const std::string_view name = ident::axis_name(axis);
    if (result.response.points() == 0) {
      warnings.push_back(fmt::format("{}: no response could be computed. {}", name, result.no_model_reason));
      continue;
    }
    const int count = unbounded_points(view_response(result.response));
    if (!result.response.reference_based || count == 0) continue;
    unbounded +=
        fmt::format("{}{} {} of {}", unbounded.empty() ? "" : ", ", name, count, result.response.points());
  }
  if (unbounded.empty()) return;
  warnings.push_back(
      fmt::format("response points without any error bound, because the excitation is lost in the noise "
                  "there: {}; their marks are "
                  "hollow and show nothing but that",
                  unbounded));
}

void warn_of_model(ident::Axis axis, const AxisResult& result, std::vector<std::string>& warnings) {
  if (!result.model) return;
  const ident::ModelFit& fit = *result.model;
  if (judge_residual(fit) == ResidualVerdict::much_larger) {
    warnings.push_back(
        fmt::format("{}: the model leaves {} times the residual the noise accounts for; its structure misses "
                    "dynamics the flight "
                    "shows, and gains from it are not supported.",
                    ident::axis_name(axis), shown(fit.reduced_chi_square, 3)));
  }
  std::string blind;
  for (const ident::ParameterEstimate& parameter : fit.parameters) {
    if (!parameter.identifiable) blind += (blind.empty() ? "" : ", ") + parameter.name;
  }
  if (!blind.empty()) {
    warnings.push_back(
        fmt::format("{}: not identifiable from this flight: {}. The value in the table is no estimate.",
                    ident::axis_name(axis), blind));
  }
  if (result.validation.empty()) {
    warnings.push_back(fmt::format(
        "{}: no validation record, so the model is checked only against the data it was fitted to.",
        ident::axis_name(axis)));
  }
}

void warn_of_gains(const GainsResult& gains, std::vector<std::string>& warnings) {
  for (const auto& [axis, recommendation] : gains.axes) {
    std::string unstable;
    std::string short_of;
    for (const ident::LoopRecommendation& loop : recommendation.loops) {
      const std::string name = loop_words(loop.loop);
      const double share = 1.0 - loop.present_margins.stable_share;
      if (share > 0.0)
        unstable += fmt::format("{}{} ({} %)", unstable.empty() ? "" : ", ", name, shown(100.0 * share, 2));
      if (loop.recommended_margins && !meets(*loop.recommended_margins, gains.requirements)) {
        short_of += (short_of.empty() ? "" : ", ") + name;
      }
    }
    if (!unstable.empty()) {
      warnings.push_back(
          fmt::format("{}: with the present gains, unstable for part of the models the data allow: {}",
                      ident::axis_name(axis), unstable));
    }
    if (!short_of.empty()) {
      warnings.push_back(fmt::format("{}: even the recommended gains do not meet the requirements: {}",
                                     ident::axis_name(axis), short_of));
    }
  }
}

}  // namespace

std::vector<std::string> page_warnings(const IdentifyResult& identified,
                                       const std::optional<GainsResult>& gains) {
  std::vector<std::string> warnings = identified.warnings;
  warn_of_responses(identified, warnings);
  for (const auto& [axis, result] : identified.axes) warn_of_model(axis, result, warnings);
  if (gains) {
    warnings.insert(warnings.end(), gains->warnings.begin(), gains->warnings.end());
    warn_of_gains(*gains, warnings);
  }
  std::vector<std::string> unique;
  for (std::string& warning : warnings) {
    if (std::find(unique.begin(), unique.end(), warning) == unique.end())
      unique.push_back(std::move(warning));
  }
  return unique;
}

}  // namespace hoverwright::reports
