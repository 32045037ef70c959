// SPDX-License-Identifier: GPL-3.0-or-later
#include <algorithm>

#include "reports/result_json.h"
#include "reports/result_readers.h"

namespace hoverwright::reports {
namespace {

using ident::AxisRecommendation;
using ident::GainRequirements;
using ident::LoopGains;
using ident::LoopRecommendation;
using ident::MarginRanges;
using ident::Range;

void put_range(OrderedJson& json, const char* key, const std::optional<Range>& range) {
  if (!range) return;
  json[key] = {{"nominal", number_json(range->nominal)},
               {"low", number_json(range->low)},
               {"high", number_json(range->high)}};
}

OrderedJson margins_json(const MarginRanges& margins) {
  OrderedJson json;
  put_range(json, "gain_margin_db", margins.gain_margin_db);
  put_range(json, "phase_margin_deg", margins.phase_margin_deg);
  put_range(json, "sensitivity_peak", margins.sensitivity_peak);
  put_range(json, "crossover_hz", margins.crossover_hz);
  json["stable_share"] = number_json(margins.stable_share);
  json["meets_share"] = number_json(margins.meets_share);
  return json;
}

OrderedJson gains_json(const LoopGains& gains) {
  OrderedJson json{
      {"kp", number_json(gains.kp)}, {"ki", number_json(gains.ki)}, {"kd", number_json(gains.kd)}};
  if (gains.derivative_cutoff_hz) json["derivative_cutoff_hz"] = number_json(*gains.derivative_cutoff_hz);
  if (gains.limit) json["limit"] = number_json(*gains.limit);
  return json;
}

OrderedJson requirements_json(const GainRequirements& requirements) {
  return {{"gain_margin_db", requirements.gain_margin_db},
          {"phase_margin_deg", requirements.phase_margin_deg},
          {"sensitivity_peak", requirements.sensitivity_peak},
          {"share_of_draws", requirements.share_of_draws},
          {"draws", requirements.draws},
          {"seed", requirements.seed},
          {"demand_noise_rms", requirements.demand_noise_rms}};
}

void put_loop(const LoopRecommendation& loop, OrderedJson& recommended, OrderedJson& present) {
  const std::string name(ident::loop_name(loop.loop));
  OrderedJson flown = gains_json(loop.present);
  flown["margins"] = margins_json(loop.present_margins);
  flown["note"] = loop.note;
  if (loop.recommended) {
    OrderedJson json = gains_json(*loop.recommended);
    if (loop.recommended_margins) json["margins"] = margins_json(*loop.recommended_margins);
    json["binding"] = loop.binding;
    recommended[name] = json;
  } else {
    flown["binding"] = loop.binding;
  }
  present[name] = flown;
}

std::optional<Range> read_range(ResultObject& margins, const std::string& key) {
  if (!margins.has(key)) return std::nullopt;
  ResultObject json = margins.object(key);
  const Range range{json.number("nominal"), json.number("low"), json.number("high")};
  json.finish();
  return range;
}

MarginRanges read_margins(ResultObject json) {
  MarginRanges margins;
  margins.gain_margin_db = read_range(json, "gain_margin_db");
  margins.phase_margin_deg = read_range(json, "phase_margin_deg");
  margins.sensitivity_peak = read_range(json, "sensitivity_peak");
  margins.crossover_hz = read_range(json, "crossover_hz");
  margins.stable_share = json.number("stable_share");
  margins.meets_share = json.number("meets_share");
  json.finish();
  return margins;
}

LoopGains read_loop_gains(ResultObject& json) {
  LoopGains gains;
  gains.kp = json.finite("kp");
  gains.ki = json.finite("ki");
  gains.kd = json.finite("kd");
  if (json.has("derivative_cutoff_hz")) gains.derivative_cutoff_hz = json.finite("derivative_cutoff_hz");
  if (json.has("limit")) gains.limit = json.finite("limit");
  return gains;
}

GainRequirements read_requirements(ResultObject json) {
  GainRequirements requirements;
  requirements.gain_margin_db = json.finite("gain_margin_db");
  requirements.phase_margin_deg = json.finite("phase_margin_deg");
  requirements.sensitivity_peak = json.finite("sensitivity_peak");
  requirements.share_of_draws = json.finite("share_of_draws");
  requirements.draws = json.count("draws");
  requirements.seed = json.seed("seed");
  requirements.demand_noise_rms = json.finite("demand_noise_rms");
  json.finish();
  return requirements;
}

void read_recommended(ResultObject json, LoopRecommendation& loop) {
  loop.recommended = read_loop_gains(json);
  if (json.has("margins")) loop.recommended_margins = read_margins(json.object("margins"));
  loop.binding = json.text_or_empty("binding");
  json.finish();
}

/// `axis` of a present loop is not written: the axes block lists its loops inside out.
AxisRecommendation read_axis(ident::Axis axis, ResultObject json, ResultObject& loops,
                             ResultObject& present) {
  AxisRecommendation recommendation;
  recommendation.axis = axis;
  for (const std::string& name : json.texts("loops")) {
    const std::optional<ident::Loop> found = ident::loop_from_name(name);
    if (!found) json.fail("loops", "\"" + name + "\" is not a loop of the hover controller");
    LoopRecommendation loop;
    loop.loop = *found;
    ResultObject flown = present.object(name);
    loop.present = read_loop_gains(flown);
    loop.present_margins = read_margins(flown.object("margins"));
    loop.note = flown.text_or_empty("note");
    if (loops.has(name)) {
      read_recommended(loops.object(name), loop);
    } else {
      loop.binding = flown.text_or_empty("binding");
    }
    flown.finish();
    recommendation.loops.push_back(std::move(loop));
  }
  ResultObject at_demand = json.object("at_demand");
  recommendation.present_at_demand = read_margins(at_demand.object("present"));
  if (at_demand.has("recommended"))
    recommendation.recommended_at_demand = read_margins(at_demand.object("recommended"));
  at_demand.finish();
  recommendation.warnings = json.texts("warnings");
  json.finish();
  return recommendation;
}

}  // namespace

std::string gains_to_json(const GainsResult& result, const Provenance& provenance) {
  OrderedJson file = file_head(kGainsFormat, result.vehicle_name, provenance);
  file["warnings"] = result.warnings;
  file["requirements"] = requirements_json(result.requirements);
  OrderedJson recommended = OrderedJson::object();
  OrderedJson present = OrderedJson::object();
  OrderedJson axes = OrderedJson::object();
  for (const auto& [axis, recommendation] : result.axes) {
    OrderedJson names = OrderedJson::array();
    for (const LoopRecommendation& loop : recommendation.loops) {
      put_loop(loop, recommended, present);
      names.push_back(std::string(ident::loop_name(loop.loop)));
    }
    OrderedJson at_demand{{"present", margins_json(recommendation.present_at_demand)}};
    if (recommendation.recommended_at_demand) {
      at_demand["recommended"] = margins_json(*recommendation.recommended_at_demand);
    }
    axes[std::string(ident::axis_name(axis))] = {
        {"loops", names}, {"at_demand", at_demand}, {"warnings", recommendation.warnings}};
  }
  file["loops"] = recommended;
  file["present"] = present;
  file["axes"] = axes;
  return result_text(file);
}

GainsResult read_gains(ResultObject file) {
  GainsResult result;
  result.vehicle_name = read_head(file, kGainsFormat).vehicle_name;
  result.warnings = file.texts("warnings");
  result.requirements = read_requirements(file.object("requirements"));
  ResultObject loops = file.object("loops");
  ResultObject present = file.object("present");
  ResultObject axes = file.object("axes");
  for (const std::string& name : axes.keys()) {
    const ident::Axis axis = axis_of(axes, name);
    result.axes.emplace(axis, read_axis(axis, axes.object(name), loops, present));
  }
  loops.finish();
  present.finish();
  file.finish();
  return result;
}

}  // namespace hoverwright::reports
