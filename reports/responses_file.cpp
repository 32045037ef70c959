// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include "reports/response_view.h"
#include "reports/result_json.h"
#include "reports/result_readers.h"

namespace hoverwright::reports {
namespace {

using ident::FrequencyResponse;
using ident::PairNoise;

template <typename Field>
OrderedJson noise_json(const FrequencyResponse& response, Field field) {
  OrderedJson array = OrderedJson::array();
  for (const PairNoise& noise : response.noise) array.push_back(number_json(field(noise)));
  return array;
}

OrderedJson pair_json(const FrequencyResponse& response) {
  OrderedJson pair;
  pair["a_real"] = real_json(response.a);
  pair["a_imag"] = imag_json(response.a);
  pair["b_real"] = real_json(response.b);
  pair["b_imag"] = imag_json(response.b);
  pair["noise_aa"] = noise_json(response, [](const PairNoise& noise) { return noise.aa; });
  pair["noise_bb"] = noise_json(response, [](const PairNoise& noise) { return noise.bb; });
  pair["noise_ab_real"] = noise_json(response, [](const PairNoise& noise) { return noise.ab.real(); });
  pair["noise_ab_imag"] = noise_json(response, [](const PairNoise& noise) { return noise.ab.imag(); });
  OrderedJson correlation = OrderedJson::array();
  for (const Eigen::VectorXcd& values : response.neighbour_correlation) {
    correlation.push_back({{"real", real_json(values)}, {"imag", imag_json(values)}});
  }
  pair["neighbour_correlation"] = correlation;
  return pair;
}

OrderedJson direct_json(const FrequencyResponse& response) {
  return {{"real", real_json(response.direct)},
          {"imag", imag_json(response.direct)},
          {"variance", array_json(response.direct_variance)}};
}

OrderedJson axis_json(const AxisResult& axis) {
  const FrequencyResponse& response = axis.response;
  const ResponseView view = view_response(response);
  OrderedJson json;
  json["reference_based"] = response.reference_based;
  json["method"] = response.method;
  json["settings"] = response.settings;
  json["records"] = response.records;
  json["segments"] = number_json(response.segments);
  json["sample_rate_hz"] = number_json(response.sample_rate_hz);
  json["frequency_hz"] = array_json(response.frequency_hz);
  json["gain_db"] = array_json(view.gain_db);
  json["phase_deg"] = array_json(view.phase_deg);
  json["gain_std_db"] = array_json(view.gain_std_db);
  json["phase_std_deg"] = array_json(view.phase_std_deg);
  json["real"] = real_json(view.response);
  json["imag"] = imag_json(view.response);
  json["variance"] = array_json(view.variance);
  json["degrees_of_freedom"] = array_json(response.degrees_of_freedom);
  json["coherence"] = array_json(response.coherence_uy);
  json["coherence_excitation_output"] = array_json(response.coherence_ry);
  json["coherence_excitation_demand"] = array_json(response.coherence_ru);
  json["pair"] = pair_json(response);
  json["direct"] = direct_json(response);
  json["output_noise_psd"] = array_json(response.output_noise_psd);
  if (axis.feedback_bias.present) {
    json["feedback_bias"] = {{"low_hz", number_json(axis.feedback_bias.low_hz)},
                             {"high_hz", number_json(axis.feedback_bias.high_hz)},
                             {"median_difference", number_json(axis.feedback_bias.median_difference)}};
  }
  return json;
}

/// An array that is either empty (not estimated) or as long as the frequency grid.
Eigen::VectorXd optional_numbers(ResultObject& object, const std::string& key, Eigen::Index points) {
  Eigen::VectorXd values = object.numbers(key);
  if (values.size() != 0 && values.size() != points) {
    object.fail(key, fmt::format("{} numbers where {} (or none) belong", values.size(), points));
  }
  return values;
}

void read_pair(ResultObject pair, Eigen::Index points, FrequencyResponse& response) {
  response.a = pair.complex_numbers("a_real", "a_imag", points);
  response.b = pair.complex_numbers("b_real", "b_imag", points);
  const Eigen::VectorXd aa = pair.numbers("noise_aa", points);
  const Eigen::VectorXd bb = pair.numbers("noise_bb", points);
  const Eigen::VectorXcd ab = pair.complex_numbers("noise_ab_real", "noise_ab_imag", points);
  response.noise.resize(static_cast<std::size_t>(points));
  for (Eigen::Index k = 0; k < points; ++k) {
    if (aa(k) < 0.0) pair.fail("noise_aa", fmt::format("element {}: a variance is negative", k));
    if (bb(k) < 0.0) pair.fail("noise_bb", fmt::format("element {}: a variance is negative", k));
    response.noise[static_cast<std::size_t>(k)] = {aa(k), bb(k), ab(k)};
  }
  std::vector<ResultObject> correlation = pair.objects("neighbour_correlation");
  if (correlation.size() != response.neighbour_correlation.size()) {
    pair.fail("neighbour_correlation", fmt::format("{} elements where {} belong", correlation.size(),
                                                   response.neighbour_correlation.size()));
  }
  for (std::size_t d = 0; d < correlation.size(); ++d) {
    const Eigen::Index size = correlation[d].numbers("real").size();
    if (size != 0 && size != points) {
      correlation[d].fail("real", fmt::format("{} numbers where {} (or none) belong", size, points));
    }
    response.neighbour_correlation[d] = correlation[d].complex_numbers("real", "imag", size);
    correlation[d].finish();
  }
  pair.finish();
}

void read_direct(ResultObject direct, Eigen::Index points, FrequencyResponse& response) {
  const Eigen::Index size = optional_numbers(direct, "real", points).size();
  response.direct = direct.complex_numbers("real", "imag", size);
  response.direct_variance = direct.numbers("variance", size);
  direct.finish();
}

void check_frequencies(const ResultObject& axis, const Eigen::VectorXd& frequency_hz) {
  for (Eigen::Index k = 0; k < frequency_hz.size(); ++k) {
    const bool rises = k == 0 ? frequency_hz(0) >= 0.0 : frequency_hz(k) > frequency_hz(k - 1);
    if (!rises) axis.fail("frequency_hz", fmt::format("element {}: frequencies must be finite and rise", k));
  }
}

/// The arrays for other programs follow from the pair; a file edited in one place only is refused.
void check_derived(ResultObject& axis, const FrequencyResponse& response) {
  const Eigen::Index points = response.points();
  for (const char* key : {"gain_db", "phase_deg", "gain_std_db", "phase_std_deg", "variance"})
    axis.numbers(key, points);
  const Eigen::VectorXcd stated = axis.complex_numbers("real", "imag", points);
  const Eigen::VectorXcd ratio = response.response();
  // One division in double: a few ulp, 1e-12 leaves room for another compiler's complex division.
  constexpr double kRelative = 1e-12;
  for (Eigen::Index k = 0; k < points; ++k) {
    if (std::abs(stated(k) - ratio(k)) > kRelative * std::abs(ratio(k))) {
      axis.fail("real", fmt::format("element {}: real and imag are not a/b of the pair", k),
                "Do not edit result files; run `hoverwright identify` again.");
    }
  }
}

AxisResult read_axis(ResultObject axis) {
  AxisResult result;
  FrequencyResponse& response = result.response;
  response.reference_based = axis.boolean("reference_based");
  response.method = axis.text_or_empty("method");
  response.settings = axis.text_or_empty("settings");
  response.records = axis.count("records");
  response.segments = axis.number("segments");
  response.sample_rate_hz = axis.number("sample_rate_hz");
  response.frequency_hz = axis.numbers("frequency_hz");
  check_frequencies(axis, response.frequency_hz);
  const Eigen::Index points = response.points();
  read_pair(axis.object("pair"), points, response);
  response.degrees_of_freedom = axis.numbers("degrees_of_freedom", points);
  response.coherence_uy = optional_numbers(axis, "coherence", points);
  response.coherence_ry = optional_numbers(axis, "coherence_excitation_output", points);
  response.coherence_ru = optional_numbers(axis, "coherence_excitation_demand", points);
  response.output_noise_psd = optional_numbers(axis, "output_noise_psd", points);
  read_direct(axis.object("direct"), points, response);
  check_derived(axis, response);
  if (axis.has("feedback_bias")) {
    ResultObject bias = axis.object("feedback_bias");
    result.feedback_bias = {true, bias.number("low_hz"), bias.number("high_hz"),
                            bias.number("median_difference")};
    bias.finish();
  }
  axis.finish();
  return result;
}

}  // namespace

std::string responses_to_json(const IdentifyResult& result, const Provenance& provenance) {
  OrderedJson file = file_head(kResponsesFormat, result.vehicle_name, provenance);
  file["warnings"] = result.warnings;
  OrderedJson axes = OrderedJson::object();
  for (const auto& [axis, found] : result.axes) axes[std::string(ident::axis_name(axis))] = axis_json(found);
  file["axes"] = axes;
  return result_text(file);
}

IdentifyResult read_responses(ResultObject file, Provenance& provenance) {
  const FileHead head = read_head(file, kResponsesFormat);
  provenance = head.provenance;
  IdentifyResult result;
  result.vehicle_name = head.vehicle_name;
  result.warnings = file.texts("warnings");
  ResultObject axes = file.object("axes");
  for (const std::string& name : axes.keys())
    result.axes.emplace(axis_of(axes, name), read_axis(axes.object(name)));
  file.finish();
  return result;
}

}  // namespace hoverwright::reports
