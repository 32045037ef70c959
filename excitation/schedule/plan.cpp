// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include <cmath>
#include <string>

#include "excitation/schedule/schedule.h"
#include "ident/failure.h"

namespace hoverwright::excitation {
namespace {

using ident::Axis;
using ident::Failure;
using ident::FailureKind;

constexpr double kFewestCycles = 4.0;  ///< of the lowest frequency in a record (common practice)
constexpr double kHighestShare =
    0.4;  ///< of the loop rate: room below half of it for the hold and the filters
constexpr double kShortestTrim_s = 0.5;  ///< closer records cannot be told apart in a log
constexpr double kShortestDoublet_s =
    0.25;  ///< a shorter run is taken for a glitch when records are looked for in a log

[[noreturn]] void refuse(const std::string& option, const std::string& problem, const std::string& advice) {
  throw Failure(FailureKind::bad_input, problem, "--" + option, advice);
}

void require_at_least(double value, double least, const std::string& option, const std::string& unit) {
  if (std::isfinite(value) && value >= least) return;
  refuse(option, fmt::format("{:.6g} {} is not allowed, {:.6g} {} is the least", value, unit, least, unit),
         "");
}

void check_band(const ScheduleOptions& options, double rate_hz) {
  for (const auto& [name, value] : {std::pair{"low", options.low_hz}, std::pair{"high", options.high_hz}}) {
    if (!std::isfinite(value) || value <= 0.0)
      refuse(name, fmt::format("{:.6g} Hz is not a positive frequency", value), "");
  }
  if (options.high_hz <= options.low_hz) {
    refuse("high",
           fmt::format("{:.6g} Hz is not above the lowest, {:.6g} Hz", options.high_hz, options.low_hz), "");
  }
  if (options.high_hz >= kHighestShare * rate_hz) {
    refuse("high",
           fmt::format("{:.6g} Hz is not below {} of the loop rate, {:.6g} Hz", options.high_hz,
                       kHighestShare, kHighestShare * rate_hz),
           "Lower it; the control loop cannot play or see faster signals faithfully.");
  }
}

void check_times(const ScheduleOptions& options) {
  require_at_least(options.trim_s, kShortestTrim_s, "trim", "s");
  require_at_least(options.doublet_s, kShortestDoublet_s, "doublet", "s");
  require_at_least(options.fade_s, 0.0, "fade", "s");
  require_at_least(options.reserve_s, 0.0, "reserve", "s");
  if (options.repeats < 1)
    refuse("repeats", fmt::format("{} chirps per axis, one is the least", options.repeats), "");
  if (!std::isfinite(options.record_s) || options.record_s <= 0.0) {
    refuse("record", fmt::format("{:.6g} s is not a positive time", options.record_s), "");
  }
  const double cycles = options.low_hz * options.record_s;
  if (cycles < kFewestCycles) {
    refuse("low",
           fmt::format("{:.6g} Hz fits only {:.2g} cycles in a record of {:.6g} s, {} are needed",
                       options.low_hz, cycles, options.record_s, kFewestCycles),
           fmt::format("Make --record at least {:.4g} s or --low at least {:.3g} Hz.",
                       kFewestCycles / options.low_hz, kFewestCycles / options.record_s));
  }
  if (options.record_s <= 1.0 / options.low_hz + 2.0 * options.fade_s) {
    refuse(
        "fade",
        fmt::format("two fades of {:.6g} s and one cycle of {:.6g} Hz leave nothing of a record of {:.6g} s",
                    options.fade_s, options.low_hz, options.record_s),
        "Shorten --fade or lengthen --record.");
  }
}

void check_share(double share, const std::string& option) {
  if (std::isfinite(share) && share > 0.0 && share <= 1.0) return;
  refuse(option, fmt::format("{:.6g} is not a share of the demand limit, above 0 and up to 1", share), "");
}

bool has_excitation(const ident::Vehicle& vehicle, Axis axis) {
  const auto& setup = vehicle.axes[ident::axis_index(axis)];
  return setup && setup->channels.excitation;
}

void check_amplitudes(const ident::Vehicle& vehicle, const ScheduleOptions& options) {
  check_share(options.demand_share, "demand-share");
  check_share(options.lean_share, "lean-share");
  for (const auto& [axis, amplitude] : options.amplitude) {
    const std::string option = fmt::format("amplitude {}", ident::axis_name(axis));
    if (!std::isfinite(amplitude) || amplitude <= 0.0) {
      refuse(option, fmt::format("{:.6g} is not a positive demand", amplitude), "");
    }
    if (amplitude > vehicle.limits.demand) {
      refuse(option,
             fmt::format("{:.6g} is beyond the demand limit of {:.6g}", amplitude, vehicle.limits.demand),
             "Lower the amplitude; raise limits.demand in the vehicle file only if the vehicle can take it.");
    }
    if (!has_excitation(vehicle, axis)) {
      refuse(option, "this axis has no excitation channel in the vehicle file",
             "Add the channel or drop the option.");
    }
  }
}

double planned_amplitude(const ident::Vehicle& vehicle, const ScheduleOptions& options, Axis axis) {
  const auto given = options.amplitude.find(axis);
  if (given != options.amplitude.end()) return given->second;
  const bool leans = axis == Axis::roll || axis == Axis::pitch;
  return vehicle.limits.demand * (leans ? options.lean_share : options.demand_share);
}

/// Puts records one after another, each with its trims, on the samples of the control loop.
class Timeline {
 public:
  Timeline(double rate_hz, double trim_s) : rate_hz_(rate_hz), trim_s_(trim_s) {}

  /// First sample at or after t. The slack keeps a t that is a sample up to rounding from moving to the next.
  [[nodiscard]] double on_sample(double t_s) const { return std::ceil(t_s * rate_hz_ - 1e-6) / rate_hz_; }

  void add(Schedule& schedule, ScheduledRecord record) {
    record.start_s = on_sample(end_s_ + trim_s_);
    end_s_ = on_sample(record.start_s + record.duration_s() + trim_s_);
    schedule.records.push_back(std::move(record));
  }
  [[nodiscard]] double end_s() const { return end_s_; }

 private:
  double rate_hz_;
  double trim_s_;
  double end_s_ = 0.0;
};

void add_axis(Schedule& schedule, Timeline& timeline, const ScheduleOptions& options, Axis axis,
              double amplitude) {
  Chirp chirp;
  chirp.amplitude = amplitude;
  chirp.low_hz = options.low_hz;
  chirp.high_hz = options.high_hz;
  chirp.duration_s = options.record_s;
  chirp.hold_cycles = 1.0;
  chirp.fade_in_s = options.fade_s;
  chirp.fade_out_s = options.fade_s;
  chirp.check();
  for (int k = 1; k <= options.repeats; ++k) {
    timeline.add(schedule, {fmt::format("{} chirp {}", ident::axis_name(axis), k), axis, 0.0, chirp, false});
  }
  const Doublet doublet{amplitude, 2.0 * timeline.on_sample(0.5 * options.doublet_s)};
  doublet.check();
  for (int k = 1; k <= 2; ++k) {
    timeline.add(schedule,
                 {fmt::format("{} doublet {}", ident::axis_name(axis), k), axis, 0.0, doublet, true});
  }
}

void check_endurance(const Schedule& schedule, const ScheduleOptions& options) {
  const double needed_s = schedule.duration_s + schedule.reserve_s;
  if (needed_s <= schedule.endurance_s) return;
  const double excess_s = needed_s - schedule.endurance_s;
  const auto chirps = static_cast<double>(schedule.records.size()) * options.repeats / (options.repeats + 2);
  const double shorter_s = std::floor(10.0 * (options.record_s - excess_s / chirps)) / 10.0;
  std::string advice = "Shorten --record, lower --repeats or --trim, or plan the axes for two batteries.";
  if (shorter_s * options.low_hz >= kFewestCycles) {
    advice = fmt::format(
        "Records of {:.1f} s would fit (--record); fewer --repeats or a shorter --trim help too.", shorter_s);
  }
  throw Failure(
      FailureKind::bad_input,
      fmt::format(
          "the flight takes {:.0f} s and {:.0f} s of reserve, {:.0f} s more than the battery's {:.0f} s "
          "(limits.endurance_s)",
          schedule.duration_s, schedule.reserve_s, std::ceil(excess_s), schedule.endurance_s),
      "schedule", advice);
}

}  // namespace

Schedule plan_schedule(const ident::Vehicle& vehicle, const ScheduleOptions& options) {
  const double rate_hz = vehicle.control.sample_rate_hz;
  check_band(options, rate_hz);
  check_times(options);
  check_amplitudes(vehicle, options);

  Schedule schedule;
  schedule.vehicle_name = vehicle.name;
  schedule.sample_rate_hz = rate_hz;
  schedule.reserve_s = options.reserve_s;
  schedule.endurance_s = vehicle.limits.endurance_s;
  schedule.trim_s = options.trim_s;
  schedule.cautions.emplace_back(
      "The amplitudes are shares of the demand limit or were given by hand; no simulation has sized them. "
      "Rehearse this "
      "schedule before you fly it, and fly the first record of each axis ready to abort.");
  Timeline timeline(rate_hz, options.trim_s);
  std::string unplanned;
  for (const Axis axis : ident::kAxes) {
    if (has_excitation(vehicle, axis)) {
      add_axis(schedule, timeline, options, axis, planned_amplitude(vehicle, options, axis));
    } else if (vehicle.axes[ident::axis_index(axis)]) {
      unplanned += fmt::format("{}{}", unplanned.empty() ? "" : ", ", ident::axis_name(axis));
    }
  }
  if (schedule.records.empty()) {
    throw Failure(FailureKind::bad_input, "no axis of the vehicle has an excitation channel", "/axes",
                  "Give axes.<axis>.channels.excitation for every axis the flight side can excite.");
  }
  if (!unplanned.empty()) {
    schedule.cautions.push_back(
        fmt::format("Not excited, no excitation channel in the vehicle file: {}.", unplanned));
  }
  schedule.duration_s = timeline.end_s();
  check_endurance(schedule, options);
  return schedule;
}

}  // namespace hoverwright::excitation
