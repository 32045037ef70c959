// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "reports/html_text.h"
#include "reports/report_sections.h"
#include "reports/report_sentences.h"

namespace hoverwright::reports {
namespace {

using ident::GainRequirements;
using ident::LoopGains;
using ident::MarginRanges;
using ident::Range;

// Ends of the strips: twice or three times the usual requirement, enough to tell "just" from "plenty".
MarginScale gain_scale(const GainRequirements& r) {
  return {0.0, 3.0 * r.gain_margin_db, r.gain_margin_db, false, 1, "dB"};
}
MarginScale phase_scale(const GainRequirements& r) {
  return {0.0, 2.0 * r.phase_margin_deg, r.phase_margin_deg, false, 1, "\u00b0"};
}
MarginScale peak_scale(const GainRequirements& r) {
  return {1.0, 2.0 * r.sensitivity_peak, r.sensitivity_peak, true, 2, ""};
}

constexpr double kStripWidth = 92.0;

double strip_position(double value, const MarginScale& scale) {
  return std::clamp((value - scale.low) / (scale.high - scale.low), 0.0, 1.0) * kStripWidth;
}

/// The fitted model's value: a tick, or an arrow head at the end it lies beyond.
std::string nominal_mark(double value, const MarginScale& scale) {
  if (value < scale.low) return "<path d=\"M5 2L0 6L5 10\" class=\"beyond\"/>";
  if (value > scale.high) {
    return fmt::format("<path d=\"M{0:.0f} 2L{1:.0f} 6L{0:.0f} 10\" class=\"beyond\"/>", kStripWidth - 5.0,
                       kStripWidth);
  }
  return fmt::format("<path d=\"M{:.1f} 1V11\" class=\"nominal\"/>", strip_position(value, scale));
}

/// Range as a bar, nominal as a tick, the requirement as a full-height line with the forbidden side hatched.
std::string strip(const Range& range, const MarginScale& scale) {
  if (!std::isfinite(range.nominal)) return {};
  const double low = std::isfinite(range.low) ? strip_position(range.low, scale) : 0.0;
  const double high = std::isfinite(range.high) ? strip_position(range.high, scale) : kStripWidth;
  const double required = strip_position(scale.required, scale);
  const double forbidden = scale.smaller_is_better ? required : 0.0;
  const double forbidden_width = scale.smaller_is_better ? kStripWidth - required : required;
  return fmt::format(
      "<svg class=\"strip\" width=\"{0:.0f}\" height=\"12\" viewBox=\"0 0 {0:.0f} 12\" aria-hidden=\"true\">"
      "<rect x=\"{1:.1f}\" y=\"1\" width=\"{2:.1f}\" height=\"10\" class=\"forbidden\" fill=\"url(#hatch)\"/>"
      "<path d=\"M0 6H{0:.0f}\" class=\"base\"/><path d=\"M{3:.1f} 0V12\" class=\"required\"/>"
      "<rect x=\"{4:.1f}\" y=\"4\" width=\"{5:.1f}\" height=\"4\" class=\"range\"/>{6}</svg>",
      kStripWidth, forbidden, forbidden_width, required, low, std::max(1.0, high - low),
      nominal_mark(range.nominal, scale));
}

std::string gain_text(const char* name, double value) {
  return value == 0.0 ? std::string()
                      : fmt::format("<span><i>{}</i>&nbsp;{}</span> ", name, shown_setting(value));
}

std::string gains_cell(const LoopGains& gains) {
  std::string text = gain_text("kp", gains.kp) + gain_text("ki", gains.ki) + gain_text("kd", gains.kd);
  if (gains.kd != 0.0 && gains.derivative_cutoff_hz)
    text += fmt::format("<span>d-filter&nbsp;{}&nbsp;Hz</span> ", shown_setting(*gains.derivative_cutoff_hz));
  return text.empty() ? "all gains 0" : text;
}

std::string crossover_cell(const std::optional<Range>& range) {
  if (!range) return "<td class=\"none\">no crossing in band</td>";
  return fmt::format("<td class=\"n\">{} Hz<br><small>{} \u2026 {}</small></td>", shown(range->nominal, 3),
                     shown(range->low, 3), shown(range->high, 3));
}

std::string share_cell(const MarginRanges& margins, const GainRequirements& requirements) {
  std::string cell = met_mark(meets(margins, requirements));
  if (margins.stable_share < 1.0) {
    cell += fmt::format("<br><b>unstable in {} %</b>", shown(100.0 * (1.0 - margins.stable_share), 2));
  }
  return fmt::format("<td>{}<br><small>{} % of draws meet all</small></td>", cell,
                     shown(100.0 * margins.meets_share, 3));
}

std::string margins_row(std::string_view head, std::string_view when, const std::string& gains,
                        const MarginRanges& margins, const GainRequirements& requirements) {
  return fmt::format(
      "<tr class=\"{}\">{}<td class=\"when\">{}</td><td class=\"gains\">{}</td>{}{}{}{}{}</tr>\n", when, head,
      when, gains, margin_cell(margins.gain_margin_db, gain_scale(requirements)),
      margin_cell(margins.phase_margin_deg, phase_scale(requirements)),
      margin_cell(margins.sensitivity_peak, peak_scale(requirements)), crossover_cell(margins.crossover_hz),
      share_cell(margins, requirements));
}

std::string remark_row(const ident::LoopRecommendation& loop) {
  std::string text;
  if (loop.recommended && !loop.binding.empty())
    text = "<b>Held back by</b> " + html_escaped(loop.binding) + ". ";
  if (!loop.recommended) text = "<b>No new gains.</b> ";
  text += html_escaped(as_sentence(loop.note));
  return text.empty() ? std::string() : "<tr class=\"remarks\"><td colspan=\"7\">" + text + "</td></tr>\n";
}

std::string loop_rows(const ident::LoopRecommendation& loop, const GainRequirements& requirements) {
  const bool tuned = loop.recommended && loop.recommended_margins;
  const std::string remarks = remark_row(loop);
  const int rows = 1 + (tuned ? 1 : 0) + (remarks.empty() ? 0 : 1);
  std::string html =
      "<tbody>" +
      margins_row(fmt::format("<th rowspan=\"{}\" scope=\"rowgroup\">{}</th>", rows, loop_words(loop.loop)),
                  "now", gains_cell(loop.present), loop.present_margins, requirements);
  if (tuned)
    html += margins_row("", "recommended", gains_cell(*loop.recommended), *loop.recommended_margins,
                        requirements);
  return html + remarks + "</tbody>\n";
}

std::string at_demand_rows(const ident::AxisRecommendation& axis, const GainRequirements& requirements) {
  const std::string head = fmt::format("<th rowspan=\"{}\" scope=\"rowgroup\">at the demand</th>",
                                       axis.recommended_at_demand ? 2 : 1);
  std::string html = "<tbody class=\"demand\">" +
                     margins_row(head, "now", "all loops closed", axis.present_at_demand, requirements);
  if (axis.recommended_at_demand)
    html += margins_row("", "recommended", "all loops closed", *axis.recommended_at_demand, requirements);
  return html + "</tbody>\n";
}

/// What the table says and what to do next.
std::string axis_gains_sentence(const ident::AxisRecommendation& axis, const GainRequirements& requirements) {
  int present_met = 0;
  int tuned = 0;
  int tuned_met = 0;
  for (const ident::LoopRecommendation& loop : axis.loops) {
    present_met += meets(loop.present_margins, requirements) ? 1 : 0;
    tuned += loop.recommended_margins ? 1 : 0;
    tuned_met += loop.recommended_margins && meets(*loop.recommended_margins, requirements) ? 1 : 0;
  }
  std::string faster;
  for (const ident::LoopRecommendation& loop : axis.loops) {
    if (!faster.empty() || !loop.recommended_margins || !loop.recommended_margins->crossover_hz ||
        !loop.present_margins.crossover_hz)
      continue;
    faster = fmt::format(" They move the crossover of {} from {} to {} Hz.", loop_words(loop.loop),
                         shown(loop.present_margins.crossover_hz->nominal, 3),
                         shown(loop.recommended_margins->crossover_hz->nominal, 3));
  }
  const std::string now = fmt::format("With the present gains {} of {} loops meet the requirements",
                                      present_met, axis.loops.size());
  if (tuned == 0) return now + "; nothing is recommended for this axis.";
  const std::string then = fmt::format("; with the recommended ones {} of the {} tuned do.{} ",
                                       tuned_met == tuned ? "all" : shown_setting(tuned_met), tuned, faster);
  if (tuned_met == tuned) return now + then + "Bring them up in steps, inner loop first.";
  return now + then + "Keep the present gains of the others and measure the axis better first.";
}

}  // namespace

std::string met_mark(bool met) {
  return met ? "<span class=\"mark yes\">\u2713 met</span>" : "<span class=\"mark no\">\u2717 NOT MET</span>";
}

std::string margin_cell(const std::optional<Range>& range, const MarginScale& scale) {
  if (!range) return "<td class=\"none\">no crossing in band</td>";
  const double step = std::pow(10.0, -scale.decimals);
  const bool short_of = scale.smaller_is_better ? !(range->nominal <= scale.required + step / 2.0)
                                                : !(range->nominal >= scale.required - step / 2.0);
  return fmt::format("<td class=\"n{}\">{}{} <small>{} \u2026 {}</small><br>{}</td>",
                     short_of ? " short" : "", shown_fixed(range->nominal, scale.decimals),
                     *scale.unit == '\0'
                         ? ""
                         : (std::string_view(scale.unit) == "\u00b0" ? "" : " ") + std::string(scale.unit),
                     shown_fixed(range->low, scale.decimals), shown_fixed(range->high, scale.decimals),
                     strip(*range, scale));
}

std::string gains_section(const std::optional<GainsResult>& gains) {
  std::string html = "<section id=\"gains\"><h2>Gains and margins</h2>\n";
  if (!gains || gains->axes.empty()) {
    return html +
           "<p class=\"warn\"><b>No margins and no recommended gains.</b> Gains need a model: run "
           "<code>hoverwright gains</code> once "
           "<code>hoverwright identify</code> has found one.</p></section>\n";
  }
  const GainRequirements& r = gains->requirements;
  html += fmt::format(
      "<p>Required: gain margin at least {} dB, phase margin at least {}\u00b0, sensitivity peak at most {}, "
      "for the fitted model and for {} % of "
      "{} draws of what the model may be within its uncertainty. Each number is the fitted model's; small "
      "print is its 95 % range. In the strips the "
      "bar is that range, the tick the fitted model (an arrow where it lies beyond the strip), the line the "
      "requirement, the hatched side falls short. "
      "Margins come "
      "from the fitted model, filters, hold and latency included; the warnings say where one is read outside "
      "the measured band.</p>\n",
      shown_setting(r.gain_margin_db), shown_setting(r.phase_margin_deg), shown_setting(r.sensitivity_peak),
      shown_setting(100.0 * r.share_of_draws), r.draws);
  html +=
      "<svg width=\"0\" height=\"0\" style=\"position:absolute\" aria-hidden=\"true\"><defs><pattern "
      "id=\"hatch\" width=\"4\" height=\"4\" "
      "patternUnits=\"userSpaceOnUse\" patternTransform=\"rotate(45)\"><path d=\"M0 0V4\" stroke=\"#8b98a5\" "
      "stroke-width=\"1.2\"/></pattern></defs></svg>\n";
  for (const auto& [axis, recommendation] : gains->axes) {
    html += fmt::format(
        "<div class=\"gains-axis\"><h3>{}</h3><p>{}</p><table "
        "class=\"margins\"><thead><tr><th>loop</th><th></th><th>gains</th><th>gain margin</th>"
        "<th>phase margin</th><th>sensitivity "
        "peak</th><th>crossover</th><th>requirements</th></tr></thead>\n",
        axis_title(axis), html_escaped(axis_gains_sentence(recommendation, r)));
    for (const ident::LoopRecommendation& loop : recommendation.loops) html += loop_rows(loop, r);
    html += at_demand_rows(recommendation, r) + "</table>";
    for (const std::string& warning : recommendation.warnings)
      html += "<p class=\"remark\">" + html_escaped(as_sentence(warning)) + "</p>";
    html += "</div>\n";
  }
  return html + "</section>\n";
}

}  // namespace hoverwright::reports
