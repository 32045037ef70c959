// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include "reports/html_text.h"
#include "reports/report_sections.h"
#include "reports/report_sentences.h"

namespace hoverwright::reports {
namespace {

/// The parameter an axis is tuned by, or nothing.
std::string parameter_cell(const AxisResult& result, const std::string& name) {
  if (!result.model) return "<td class=\"none\">no model</td>";
  for (const ident::ParameterEstimate& parameter : result.model->parameters) {
    if (parameter.name != name) continue;
    if (!parameter.identifiable) return "<td><span class=\"mark no\">\u2298 not identifiable</span></td>";
    const ShownUnit unit = shown_unit(parameter.unit);
    const ShownInterval interval = shown_interval(parameter.value * unit.factor, parameter.low * unit.factor,
                                                  parameter.high * unit.factor);
    return fmt::format("<td class=\"n\">{} {}<br><small>{} \u2026 {}</small></td>", interval.value,
                       html_escaped(unit.text), interval.low, interval.high);
  }
  return "<td class=\"none\">none</td>";
}

std::string known_band_cell(const AxisResult& result) {
  if (!result.response.reference_based) return "<td><span class=\"mark no\">direct only</span></td>";
  const auto band =
      band_known_within(view_response(result.response), result.response.frequency_hz, kKnownWithinDb);
  if (!band) return "<td class=\"none\">nowhere</td>";
  return fmt::format("<td class=\"n\">{} \u2026 {} Hz</td>", shown(band->low_hz, 2), shown(band->high_hz, 2));
}

std::string validation_cell(const AxisResult& result) {
  if (!result.model) return "<td class=\"none\">\u2013</td>";
  if (result.validation.empty()) return "<td class=\"none\">no record</td>";
  std::string cells;
  for (const ident::ValidationResult& record : result.validation) {
    cells += (cells.empty() ? "" : ", ") + shown_fixed(record.fit_percent, 0) + " %";
  }
  return "<td class=\"n\">" + cells + "</td>";
}

/// Loops that meet the requirements, with the gains flown or recommended.
std::string loops_cell(const std::optional<GainsResult>& gains, ident::Axis axis, bool recommended) {
  if (!gains || gains->axes.count(axis) == 0) return "<td class=\"none\">\u2013</td>";
  int loops = 0;
  int met = 0;
  for (const ident::LoopRecommendation& loop : gains->axes.at(axis).loops) {
    if (recommended && !loop.recommended_margins) continue;
    ++loops;
    met += meets(recommended ? *loop.recommended_margins : loop.present_margins, gains->requirements) ? 1 : 0;
  }
  if (loops == 0) return "<td class=\"none\">none</td>";
  return fmt::format("<td>{}<br><small>{} of {} loops</small></td>", met_mark(met == loops), met, loops);
}

std::string opening_words(const IdentifyResult& identified, const std::optional<GainsResult>& gains) {
  std::string with_model;
  std::string without;
  for (const auto& [axis, result] : identified.axes) {
    std::string& list = result.model ? with_model : without;
    list += (list.empty() ? "" : ", ") + std::string(ident::axis_name(axis));
  }
  std::string words;
  if (!with_model.empty()) words += "A model was found for " + with_model + ". ";
  if (!without.empty()) words += "No model for " + without + ". ";
  if (!gains || gains->axes.empty()) return words + "No gains are recommended.";
  int loops = 0;
  int met = 0;
  int tuned = 0;
  int tuned_met = 0;
  for (const auto& [axis, recommendation] : gains->axes) {
    for (const ident::LoopRecommendation& loop : recommendation.loops) {
      ++loops;
      met += meets(loop.present_margins, gains->requirements) ? 1 : 0;
      if (!loop.recommended_margins) continue;
      ++tuned;
      tuned_met += meets(*loop.recommended_margins, gains->requirements) ? 1 : 0;
    }
  }
  words += fmt::format("With the gains flown, {} of {} loops meet the requirements. ", met, loops);
  words += fmt::format(
      "New gains are recommended for {} loops, of which {} meet them over the model's uncertainty.", tuned,
      tuned_met);
  return words;
}

}  // namespace

std::string title_block(const std::string& vehicle_name, const Provenance& provenance) {
  std::string inputs;
  for (const auto& [name, hash] : provenance.inputs) {
    inputs +=
        fmt::format("<tr><td>{}</td><td class=\"hash\">{}</td></tr>", html_escaped(name), html_escaped(hash));
  }
  return fmt::format(
      "<header class=\"title\"><div class=\"brand\">Hoverwright</div><h1>{}</h1><p class=\"what\">Hover "
      "response and gains review</p>"
      "<dl><div><dt>program</dt><dd>{}</dd></div><div><dt>command</dt><dd>{}</dd></div></dl>"
      "<table class=\"inputs\"><caption>inputs and their SHA-256</caption>{}</table></header>\n",
      html_escaped(vehicle_name), html_escaped(provenance.program_version), html_escaped(provenance.command),
      inputs);
}

std::string warnings_section(const IdentifyResult& identified, const std::optional<GainsResult>& gains) {
  std::string html;
  bool any_direct = false;
  bool all_direct = !identified.axes.empty();
  for (const auto& [axis, result] : identified.axes) {
    any_direct = any_direct || !result.response.reference_based;
    all_direct = all_direct && !result.response.reference_based;
  }
  if (any_direct) {
    html += fmt::format(
        "<div class=\"alarm\"><h2>{} not identified: no excitation was logged</h2><p>What follows for {} is "
        "the direct estimate from demand to "
        "output. The controller fed gusts and noise back into the demand, and that biases it by an amount "
        "the error bars do not "
        "show. High coherence does not help. No model and no gains follow from it. Fly a designed excitation "
        "(<code>hoverwright schedule</code>), log it, and identify again.</p></div>\n",
        all_direct ? "The vehicle was" : "Some axes were", all_direct ? "every axis" : "these axes");
  }
  const std::vector<std::string> warnings = page_warnings(identified, gains);
  html += "<section id=\"warnings\" class=\"warnings\"><h2>Warnings</h2>";
  if (warnings.empty()) return html + "<p>" + (any_direct ? "No others." : "None.") + "</p></section>\n";
  html += "<ol>";
  for (const std::string& warning : warnings) html += "<li>" + html_escaped(as_sentence(warning)) + "</li>\n";
  return html + "</ol></section>\n";
}

std::string cautions_section() {
  return "<section id=\"cautions\" class=\"cautions\"><h2>Before anyone flies on this</h2><p>Excitation and "
         "new gains can upset a vehicle. Fly with a "
         "safety pilot who can abort at once, clear of people, within local rules and the maker's limits. "
         "Bring gains up in steps. "
         "The numbers hold for the vehicle, payload and air in which they were measured. Nothing here "
         "replaces licensed practice or an "
         "airworthiness approval.</p></section>\n";
}

std::string summary_section(const IdentifyResult& identified, const std::optional<GainsResult>& gains) {
  std::string html = "<section id=\"summary\"><h2>Summary</h2><p class=\"lead\">" +
                     html_escaped(opening_words(identified, gains)) + "</p>\n";
  html += fmt::format(
      "<table class=\"summary\"><thead><tr><th>axis</th><th>gain known within {:.0f} "
      "dB</th><th>effectiveness</th><th>total delay</th>"
      "<th>unseen record reproduced</th><th>requirements, gains flown</th><th>requirements, "
      "recommended</th></tr></thead><tbody>\n",
      kKnownWithinDb);
  for (const auto& [axis, result] : identified.axes) {
    html +=
        fmt::format("<tr><th><a href=\"#{}\">{}{}</a></th>{}{}{}{}{}{}</tr>\n", ident::axis_name(axis),
                    axis_emblem(axis), axis_title(axis), known_band_cell(result),
                    parameter_cell(result, "effectiveness"), parameter_cell(result, "delay"),
                    validation_cell(result), loops_cell(gains, axis, false), loops_cell(gains, axis, true));
  }
  return html +
         "</tbody></table><p class=\"small\">Small print under a number: its 95 % interval.</p></section>\n";
}

}  // namespace hoverwright::reports
