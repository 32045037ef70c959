// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/report_plots.h"

#include <algorithm>
#include <cmath>

#include "reports/report_sentences.h"
#include "reports/result_json.h"

namespace hoverwright::reports {
namespace {

using Eigen::Index;

constexpr Index kBandPoints = 160;  // across the plot's width: a line without corners
constexpr double kPointsPerOctave = 16.0;

/// Six significant digits: finer than any pixel, and the page stays small.
OrderedJson plot_number(double value) {
  if (!std::isfinite(value)) return nullptr;
  if (value == 0.0) return 0.0;
  const double step = std::pow(10.0, std::floor(std::log10(std::abs(value))) - 5.0);
  const double digits = std::round(value / step);
  // Dividing by a power of ten of at least one keeps short decimal text where multiplying by 1e-5 would not.
  return step < 1.0 ? digits / std::round(1.0 / step) : digits * step;
}

OrderedJson plot_number(const std::optional<double>& value) {
  return value ? plot_number(*value) : OrderedJson(nullptr);
}

OrderedJson plot_array(const Eigen::VectorXd& values) {
  OrderedJson array = OrderedJson::array();
  for (const double value : values) array.push_back(plot_number(value));
  return array;
}

OrderedJson points_json(const AxisResult& result, const ResponseView& view) {
  OrderedJson points;
  for (const char* key : {"f", "gain", "gainLow", "gainHigh", "phase", "phaseLow", "phaseHigh", "bounded"}) {
    points[key] = OrderedJson::array();
  }
  for (const Index k : drawn_points(result.response.frequency_hz)) {
    const PointLimits& limits = view.limits[static_cast<std::size_t>(k)];
    points["f"].push_back(plot_number(result.response.frequency_hz(k)));
    points["gain"].push_back(plot_number(view.gain_db(k)));
    points["gainLow"].push_back(plot_number(limits.gain_low_db));
    points["gainHigh"].push_back(plot_number(limits.gain_high_db));
    points["phase"].push_back(plot_number(view.phase_deg(k)));
    const bool known = limits.phase_half_width_deg.has_value();
    points["phaseLow"].push_back(known ? plot_number(view.phase_deg(k) - *limits.phase_half_width_deg)
                                       : nullptr);
    points["phaseHigh"].push_back(known ? plot_number(view.phase_deg(k) + *limits.phase_half_width_deg)
                                        : nullptr);
    points["bounded"].push_back(limits.bounded);
  }
  return points;
}

OrderedJson direct_json(const AxisResult& result, const ResponseView& view) {
  OrderedJson direct;
  for (const char* key : {"f", "gain", "phase"}) direct[key] = OrderedJson::array();
  for (const Index k : drawn_points(result.response.frequency_hz)) {
    direct["f"].push_back(plot_number(result.response.frequency_hz(k)));
    direct["gain"].push_back(plot_number(view.direct_gain_db(k)));
    direct["phase"].push_back(plot_number(view.direct_phase_deg(k)));
  }
  return direct;
}

OrderedJson band_json(const ident::ResponseBand& band) {
  return {{"f", plot_array(band.frequency_hz)},          {"gain", plot_array(band.gain_db)},
          {"gainLow", plot_array(band.gain_low_db)},     {"gainHigh", plot_array(band.gain_high_db)},
          {"phase", plot_array(band.phase_deg)},         {"phaseLow", plot_array(band.phase_low_deg)},
          {"phaseHigh", plot_array(band.phase_high_deg)}};
}

OrderedJson coherence_json(const ident::FrequencyResponse& response) {
  OrderedJson coherence{{"f", plot_array(response.frequency_hz)}};
  if (response.coherence_uy.size() > 0) coherence["demandOutput"] = plot_array(response.coherence_uy);
  if (response.coherence_ry.size() > 0) coherence["excitationOutput"] = plot_array(response.coherence_ry);
  if (response.coherence_ru.size() > 0) coherence["excitationDemand"] = plot_array(response.coherence_ru);
  return coherence;
}

OrderedJson axis_json(ident::Axis axis, const AxisResult& result) {
  const ResponseView view = view_response(result.response);
  const OutputWords output = output_words(axis, result);
  OrderedJson json{{"output", output.quantity},
                   {"unit", output.unit},
                   {"referenceBased", result.response.reference_based}};
  json["points"] = points_json(result, view);
  if (result.response.reference_based && view.direct_gain_db.size() > 0)
    json["direct"] = direct_json(result, view);
  if (result.model) json["model"] = band_json(drawn_band(result, view));
  json["coherence"] = coherence_json(result.response);
  json["validation"] = OrderedJson::array();
  for (const ident::ValidationResult& record : result.validation) {
    json["validation"].push_back({{"time", plot_array(record.time_s)},
                                  {"measured", plot_array(record.measured)},
                                  {"simulated", plot_array(record.simulated)}});
  }
  return json;
}

double interpolated(const Eigen::VectorXd& x, const Eigen::VectorXd& y, double at) {
  const auto above = std::upper_bound(x.data(), x.data() + x.size(), at);
  const Index high = std::clamp<Index>(above - x.data(), 1, x.size() - 1);
  const double share = (at - x(high - 1)) / (x(high) - x(high - 1));
  return y(high - 1) + share * (y(high) - y(high - 1));
}

}  // namespace

std::vector<Index> drawn_points(const Eigen::VectorXd& frequency_hz) {
  std::vector<Index> drawn;
  const double ratio = std::exp2(1.0 / kPointsPerOctave);
  for (Index k = 0; k < frequency_hz.size(); ++k) {
    if (frequency_hz(k) <= 0.0) continue;  // no place on a log axis
    if (drawn.empty() || frequency_hz(k) >= frequency_hz(drawn.back()) * ratio) drawn.push_back(k);
  }
  return drawn;
}

ident::ResponseBand drawn_band(const AxisResult& result, const ResponseView& view) {
  const ident::ModelFit& fit = *result.model;
  Eigen::VectorXd grid =
      Eigen::VectorXd::LinSpaced(kBandPoints, std::log(fit.band_low_hz), std::log(fit.band_high_hz));
  grid = grid.array().exp().matrix().eval();
  ident::ResponseBand band = ident::response_band(fit, grid);
  std::vector<double> differences;
  for (Index k = 0; k < view.phase_deg.size(); ++k) {
    const double frequency = result.response.frequency_hz(k);
    if (!view.limits[static_cast<std::size_t>(k)].trusted() || frequency < grid(0) ||
        frequency > grid(kBandPoints - 1))
      continue;
    differences.push_back(view.phase_deg(k) - interpolated(grid, band.phase_deg, frequency));
  }
  if (differences.empty()) return band;
  const auto middle = differences.begin() + static_cast<std::ptrdiff_t>(differences.size() / 2);
  std::nth_element(differences.begin(), middle, differences.end());
  const double turns = 360.0 * std::round(*middle / 360.0);
  for (Eigen::VectorXd* phase : {&band.phase_deg, &band.phase_low_deg, &band.phase_high_deg})
    phase->array() += turns;
  return band;
}

std::string plot_data(const IdentifyResult& identified) {
  OrderedJson axes = OrderedJson::object();
  for (const auto& [axis, result] : identified.axes)
    axes[std::string(ident::axis_name(axis))] = axis_json(axis, result);
  return axes.dump();
}

}  // namespace hoverwright::reports
