// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/gains.h"

#include <fmt/format.h>

#include <algorithm>

#include "ident/commands/study.h"
#include "ident/failure.h"
#include "ident/files.h"
#include "ident/loops/recommend.h"

namespace hoverwright::ident {
namespace {

CascadeSetup cascade_setup(const Vehicle& vehicle, Axis axis) {
  CascadeSetup setup;
  setup.axis = axis;
  setup.sample_rate_hz = vehicle.control.sample_rate_hz;
  setup.gyro_filter_hz = vehicle.control.gyro_filter_hz;
  setup.speed_damping_1_s = vehicle.speed_damping_1_s.value_or(0.0);
  return setup;
}

std::string margin_text(const std::optional<Range>& range, const char* unit) {
  if (!range) return "no crossing";
  return fmt::format("{:.1f} {} ({:.1f} .. {:.1f})", range->nominal, unit, range->low, range->high);
}

std::string crossover_text(const std::optional<Range>& range) {
  return range ? fmt::format("{:.2f} Hz", range->nominal) : "no crossing";
}

std::string gains_text(const LoopGains& gains) {
  std::string text = fmt::format("kp {}", significant(gains.kp, 3));
  if (gains.ki != 0.0) text += fmt::format("  ki {}", significant(gains.ki, 3));
  if (gains.kd != 0.0) text += fmt::format("  kd {}", significant(gains.kd, 3));
  return text;
}

void print_margins(std::string_view when, const std::string& gains, const MarginRanges& margins,
                   std::ostream& out) {
  out << fmt::format(
      "    {:<8} {:<34} {:<26} {:<28} {}{}\n", when, gains, margin_text(margins.gain_margin_db, "dB"),
      margin_text(margins.phase_margin_deg, "deg"), crossover_text(margins.crossover_hz),
      margins.stable_share < 1.0
          ? fmt::format("   UNSTABLE in {:.0f} % of draws", 100.0 * (1.0 - margins.stable_share))
          : "");
}

void print_axis(const AxisRecommendation& axis, std::ostream& out) {
  out << fmt::format("{}: gain margin, phase margin (95 % range over the model's uncertainty), crossover\n",
                     axis_name(axis.axis));
  for (const LoopRecommendation& loop : axis.loops) {
    out << "  " << loop_name(loop.loop) << "\n";
    print_margins("now", gains_text(loop.present), loop.present_margins, out);
    if (loop.recommended && loop.recommended_margins) {
      print_margins("proposed", gains_text(*loop.recommended), *loop.recommended_margins, out);
      if (!loop.binding.empty()) out << "    held back by " << loop.binding << "\n";
    }
    if (!loop.note.empty()) out << "    " << loop.note << "\n";
  }
  out << "  at the demand, all loops closed\n";
  print_margins("now", "", axis.present_at_demand, out);
  if (axis.recommended_at_demand) print_margins("proposed", "", *axis.recommended_at_demand, out);
}

/// White level of the output noise: median over the highest fifth of the measured lines, where gusts have
/// died out.
double white_noise_psd(const FrequencyResponse& response) {
  const Eigen::Index points = response.output_noise_psd.size();
  const Eigen::Index count = std::max<Eigen::Index>(1, points / 5);
  if (points == 0) return 0.0;
  Eigen::VectorXd top = response.output_noise_psd.tail(count);
  std::nth_element(top.data(), top.data() + count / 2, top.data() + count);
  return top(count / 2);
}

}  // namespace

reports::GainsResult recommend_gains(const reports::IdentifyResult& identified, const Vehicle& vehicle,
                                     const GainRequirements& requirements) {
  reports::GainsResult result;
  result.vehicle_name = vehicle.name;
  result.requirements = requirements;
  for (const auto& [axis, found] : identified.axes) {
    if (!found.model) {
      result.warnings.push_back(
          fmt::format("{}: no model, so no margins and no gains for its loops", axis_name(axis)));
      continue;
    }
    AxisRecommendation recommendation =
        recommend_axis(cascade_setup(vehicle, axis), vehicle.loops, *found.model,
                       white_noise_psd(found.response), requirements);
    for (const std::string& warning : recommendation.warnings) {
      result.warnings.push_back(fmt::format("{}: {}", axis_name(axis), warning));
    }
    result.axes.emplace(axis, std::move(recommendation));
  }
  if (!vehicle.speed_damping_1_s && (result.axes.count(Axis::roll) + result.axes.count(Axis::pitch)) > 0) {
    result.warnings.emplace_back(
        "velocity and position loops: the vehicle file gives no speed_damping_1_s, none was assumed (0 1/s, "
        "the cautious side at low frequency)");
  }
  return result;
}

LoopGainSet recommended_gain_set(const Vehicle& vehicle, const reports::GainsResult& result) {
  LoopGainSet gains = vehicle.loops;
  for (const auto& [axis, recommendation] : result.axes) {
    for (const LoopRecommendation& loop : recommendation.loops) {
      if (loop.recommended) gains[loop_index(loop.loop)] = loop.recommended;
    }
  }
  return gains;
}

void run_gains(const GainsOptions& options, std::ostream& out) {
  const Vehicle vehicle = read_vehicle(vehicle_file(options.study));
  require_step(responses_file(options.study), "identify");
  require_step(models_file(options.study), "identify");
  const reports::IdentifyResult identified =
      reports::read_identify_result(responses_file(options.study), models_file(options.study));
  const bool any = std::any_of(identified.axes.begin(), identified.axes.end(),
                               [](const auto& entry) { return entry.second.model.has_value(); });
  if (!any) {
    throw Failure(FailureKind::unsupported, "no axis has a model, so there is nothing to base gains on",
                  models_file(options.study).string(),
                  "Fly an excitation schedule with its excitation logged, then run `hoverwright identify`.");
  }
  const reports::GainsResult result = recommend_gains(identified, vehicle, options.requirements);
  const std::string command = fmt::format(
      "gains --gain-margin {} --phase-margin {} --sensitivity {} --share {} --draws {} --seed {} "
      "--demand-noise {}",
      options.requirements.gain_margin_db, options.requirements.phase_margin_deg,
      options.requirements.sensitivity_peak, options.requirements.share_of_draws, options.requirements.draws,
      options.requirements.seed, options.requirements.demand_noise_rms);
  const std::string json = gains_to_json(
      result, make_provenance(
                  options.study, command,
                  {vehicle_file(options.study), responses_file(options.study), models_file(options.study)}));
  write_file(gains_file(options.study), json);
  if (options.json) {
    out << json << "\n";
    return;
  }
  for (const auto& [axis, recommendation] : result.axes) print_axis(recommendation, out);
  for (const std::string& warning : result.warnings) out << "warning: " << warning << "\n";
  out << "Bring gains up in steps of at most 30 %, with a safety pilot, and look at the margins again after "
         "each flight.\n";
  out << fmt::format("written: {}\n", gains_file(options.study).string());
}

}  // namespace hoverwright::ident
