// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include <algorithm>

#include "ident/models/structure.h"
#include "reports/html_text.h"
#include "reports/report_plots.h"
#include "reports/report_sections.h"
#include "reports/report_sentences.h"

namespace hoverwright::reports {
namespace {

std::string figure(ident::Axis axis, std::string_view plot, const std::string& label, const std::string& note,
                   const std::string& key = "") {
  return fmt::format(
      "<figure class=\"row\"><div class=\"plot\" data-axis=\"{}\" data-plot=\"{}\" role=\"img\" "
      "aria-label=\"{}\"></div>"
      "<figcaption>{}<p>{}</p><p class=\"readout\"></p></figcaption></figure>\n",
      ident::axis_name(axis), plot, html_escaped(label), key, html_escaped(note));
}

std::string key_entry(std::string_view mark, std::string_view words) {
  return fmt::format("<li><span class=\"key {}\"></span>{}</li>", mark, words);
}

std::string response_key(const AxisResult& result) {
  std::string key = "<ul class=\"keys\">";
  if (result.response.reference_based) {
    key += key_entry("dot", "measured, 95 % bars; hollow dot with a dashed line: no bound");
    if (result.response.direct.size() > 0) key += key_entry("cross", "direct estimate, for comparison");
  } else {
    key += key_entry("dot", "direct estimate, biased by feedback; bars: noise only");
  }
  if (result.model) key += key_entry("line", "fitted model, 95 % band");
  return key + "</ul>";
}

std::string coherence_key(const ident::FrequencyResponse& response) {
  std::string key = "<ul class=\"keys\">";
  if (response.coherence_ry.size() > 0) key += key_entry("solid", "excitation to output");
  if (response.coherence_ru.size() > 0) key += key_entry("dashed", "excitation to demand");
  if (response.coherence_uy.size() > 0) key += key_entry("dotted", "demand to output");
  return key + "</ul>";
}

std::string counts_note(const AxisResult& result, const ResponseView& view) {
  const Eigen::Index points = result.response.points();
  const std::size_t drawn = drawn_points(result.response.frequency_hz).size();
  std::string note = fmt::format(
      "{} of {} points drawn, evenly over log frequency; responses.json holds all.", drawn, points);
  const int unbounded = unbounded_points(view);
  if (unbounded > 0) note += fmt::format(" {} of all {} are unbounded.", unbounded, points);
  return note;
}

std::string response_figures(ident::Axis axis, const AxisResult& result, const ResponseView& view) {
  const OutputWords output = output_words(axis, result);
  std::string html = figure(axis, "gain", fmt::format("Gain of {} over frequency", output.quantity),
                            gain_sentence(result, view), response_key(result));
  html += figure(axis, "phase", fmt::format("Phase of {} over frequency", output.quantity),
                 phase_sentence(axis, result, view));
  html += figure(axis, "coherence", "Coherence over frequency", coherence_sentence(result),
                 coherence_key(result.response));
  html +=
      fmt::format("<p class=\"small\">{} {} {}. {} record{}, {} windows averaged, {} Hz sampling.</p>\n",
                  html_escaped(counts_note(result, view)), html_escaped(as_sentence(result.response.method)),
                  html_escaped(result.response.settings), result.response.records,
                  result.response.records == 1 ? "" : "s", shown_setting(result.response.segments),
                  shown_setting(result.response.sample_rate_hz));
  if (result.feedback_bias.present) {
    const ident::FeedbackBias& bias = result.feedback_bias;
    html += fmt::format(
        "<p class=\"remark\"><b>Feedback bias.</b> From {} to {} Hz the direct estimate (crosses) is off by "
        "{} % (median), "
        "more than both error bands allow. The dots are not affected; whatever is computed from demand and "
        "output alone is.</p>\n",
        shown(bias.low_hz, 2), shown(bias.high_hz, 2), shown(100.0 * bias.median_difference, 2));
  }
  return html;
}

/// The letter that stands for the parameter in the structure's formula.
std::string_view symbol(std::string_view parameter) {
  if (parameter == "effectiveness") return "K";
  if (parameter == "damping") return "a";
  if (parameter == "motor_lag") return "T";
  if (parameter == "reaction_lead") return "T_z";
  return {};
}

std::string parameter_row(const ident::ParameterEstimate& parameter) {
  const ShownUnit unit = shown_unit(parameter.unit);
  const ShownInterval interval = shown_interval(parameter.value * unit.factor, parameter.low * unit.factor,
                                                parameter.high * unit.factor);
  const std::string mark =
      parameter.identifiable ? "" : "<span class=\"mark no\">\u2298 not identifiable</span>";
  return fmt::format(
      "<tr{}><th>{} <i class=\"symbol\">{}</i></th><td class=\"n\">{}</td><td class=\"n\">{} \u2026 "
      "{}</td><td "
      "class=\"n\">{}</td><td>{}</td><td>{}</td></tr>\n",
      parameter.identifiable ? "" : " class=\"blind\"", html_escaped(parameter.name), symbol(parameter.name),
      interval.value, interval.low, interval.high, shown(parameter.standard_error * unit.factor, 2),
      html_escaped(unit.text), mark);
}

std::string model_part(const AxisResult& result) {
  if (!result.model) {
    const std::string reason = result.no_model_reason.empty()
                                   ? "this study holds no model of the axis; run `hoverwright identify`."
                                   : result.no_model_reason;
    return "<p class=\"warn\"><b>No model.</b> " + html_escaped(as_sentence(reason)) + "</p>\n";
  }
  const ident::ModelFit& fit = *result.model;
  std::string html = fmt::format(
      "<div class=\"row\"><div><table class=\"numbers\"><caption>Model <i>{}</i>: <span "
      "class=\"formula\">{}</span></caption>"
      "<thead><tr><th>parameter</th><th>value</th><th>95 % interval</th><th>std. "
      "error</th><th>unit</th><th></th></tr></thead><tbody>\n",
      html_escaped(fit.structure), html_escaped(ident::Structure::find(fit.structure).formula()));
  for (const ident::ParameterEstimate& parameter : fit.parameters) {
    html += parameter_row(parameter);
  }
  html += "</tbody></table>\n";
  html += fmt::format(
      "<p class=\"small\">Fitted to {} points {}; delay is the total, of which the hold's half sample is {} "
      "ms.</p></div>\n",
      fit.points, band_words({fit.band_low_hz, fit.band_high_hz}), shown_setting(500.0 / fit.sample_rate_hz));
  html += "<div class=\"note\"><p>" + html_escaped(model_sentence(fit)) + "</p>";
  for (const std::string& warning : fit.warnings)
    html += "<p class=\"remark\">" + html_escaped(as_sentence(warning)) + "</p>";
  return html + "</div></div>\n";
}

std::string validation_part(ident::Axis axis, const AxisResult& result) {
  if (!result.model) return {};
  if (result.validation.empty()) {
    return "<p class=\"remark\"><b>No validation record.</b> The model was compared only with the data it "
           "was fitted to; fly a doublet on this axis.</p>\n";
  }
  const std::string key = "<ul class=\"keys\">" + key_entry("solid", "measured") +
                          key_entry("simulated", "model, driven by the logged demand") + "</ul>";
  std::string html;
  for (std::size_t i = 0; i < result.validation.size(); ++i) {
    html += figure(axis, fmt::format("validation-{}", i),
                   fmt::format("Measured and simulated output of record {}", i + 1),
                   validation_sentence(result.validation[i], i + 1), key);
  }
  return html;
}

}  // namespace

std::string axis_emblem(ident::Axis axis) {
  constexpr std::string_view kHead =
      "<svg class=\"emblem\" viewBox=\"0 0 64 44\" width=\"64\" height=\"44\" aria-hidden=\"true\" "
      "fill=\"none\" stroke=\"currentColor\" "
      "stroke-width=\"2\" stroke-linecap=\"round\">";
  // Seen from behind (roll, heave), from the side (pitch), from above (yaw); the arrow is the positive
  // motion.
  constexpr std::string_view kRear =
      "<path d=\"M10 24H54M27 24v6h10v-6\"/><path d=\"M3 20H17M47 20H61\" stroke-width=\"3\"/>";
  constexpr std::string_view kSide =
      "<path d=\"M10 26H54M25 26v6h18l-4-6\"/><path d=\"M3 22H17M47 22H61\" stroke-width=\"3\"/>";
  constexpr std::string_view kTop =
      "<path d=\"M20 11L44 33M44 11L20 33\"/><circle cx=\"18\" cy=\"9\" r=\"6\"/><circle cx=\"46\" cy=\"9\" "
      "r=\"6\"/>"
      "<circle cx=\"18\" cy=\"35\" r=\"6\"/><circle cx=\"46\" cy=\"35\" r=\"6\"/>";
  std::string drawing(kHead);
  switch (axis) {
    case ident::Axis::roll:
      drawing += kRear;
      drawing += "<path class=\"motion\" d=\"M20 12Q32 2 44 12M44 12l-1-6M44 12l-6-1\"/>";
      break;
    case ident::Axis::pitch:
      drawing += kSide;
      drawing += "<path class=\"motion\" d=\"M44 14Q32 3 20 14M20 14l1-6M20 14l6-1\"/>";
      break;
    case ident::Axis::yaw:
      drawing += kTop;
      drawing += "<path class=\"motion\" d=\"M27 15Q32 11 37 15M37 15l0-5M37 15l-5 0\"/>";
      break;
    case ident::Axis::heave:
      drawing += kRear;
      drawing += "<path class=\"motion\" d=\"M32 18V4M32 4l-5 5M32 4l5 5\"/>";
      break;
  }
  return drawing + "</svg>";
}

std::string axis_section(ident::Axis axis, const AxisResult& result) {
  const OutputWords output = output_words(axis, result);
  std::string html =
      fmt::format("<section class=\"axis\" id=\"{}\"><h2>{}{}<small>{}, {} per unit demand</small></h2>\n",
                  ident::axis_name(axis), axis_emblem(axis), axis_title(axis), output.quantity,
                  html_escaped(output.unit));
  if (!result.response.reference_based) {
    html +=
        "<p class=\"warn\"><b>Direct estimate only.</b> No excitation was logged, so these points are "
        "demand-to-output while the "
        "controller was feeding gusts and noise back into the demand. Where that dominates they show minus "
        "the inverse of the "
        "controller, not the vehicle. Do not tune from them.</p>\n";
  }
  if (result.response.points() > 0) {
    html += response_figures(axis, result, view_response(result.response));
  } else {
    html +=
        "<p class=\"warn\"><b>No response.</b> The log holds no record on this axis that a response could be "
        "computed from.</p>\n";
  }
  return html + model_part(result) + validation_part(axis, result) + "</section>\n";
}

}  // namespace hoverwright::reports
