// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/rehearse.h"

#include <fmt/format.h>

#include <algorithm>

#include "excitation/rehearsal/rehearsal.h"
#include "ident/commands/study.h"
#include "ident/failure.h"
#include "ident/files.h"

namespace hoverwright::ident {

namespace {

using excitation::Excursions;
using excitation::Peaks;
using excitation::RecordPeaks;

/// Peaks over all records of an axis.
Peaks peaks_of_axis(const Excursions& excursions, Axis axis) {
  Peaks all;
  for (const RecordPeaks& record : excursions.by_record) {
    if (record.axis != axis) continue;
    for (double Peaks::*peak :
         {&Peaks::tilt_deg, &Peaks::rate_deg_s, &Peaks::demand, &Peaks::drift_m, &Peaks::climb_m}) {
      all.*peak = std::max(all.*peak, record.peaks.*peak);
    }
  }
  return all;
}

void print_row(std::ostream& out, std::string_view name, const Peaks& p) {
  out << fmt::format("  {:<16}{:>10.1f}{:>14.1f}{:>12.3f}{:>11.2f}{:>11.2f}\n", name, p.tilt_deg,
                     p.rate_deg_s, p.demand, p.drift_m, p.climb_m);
}

void print_excursions(std::ostream& out, const Excursions& excursions, const Vehicle& vehicle) {
  const Limits& limits = vehicle.limits;
  out << fmt::format("  {:<16}{:>10}{:>14}{:>12}{:>11}{:>11}\n", "largest", "tilt, deg", "rate, deg/s",
                     "demand, 1", "drift, m", "climb, m");
  for (const Axis axis : kAxes) {
    const bool excited = std::any_of(excursions.by_record.begin(), excursions.by_record.end(),
                                     [&](const RecordPeaks& record) { return record.axis == axis; });
    if (excited) print_row(out, fmt::format("{} records", axis_name(axis)), peaks_of_axis(excursions, axis));
  }
  print_row(out, "whole flight", excursions);
  print_row(out, "limit",
            {limits.tilt_deg, limits.rate_deg_s, limits.demand, limits.drift_m, limits.climb_m});
  out << fmt::format("  motors saturated in {:.2f} % of the samples\n", 100.0 * excursions.saturated_share);
}

std::string advice_for(const Excursions& excursions, bool calm) {
  std::string axes;
  for (const Axis axis : kAxes) {
    const bool exceeds =
        std::any_of(excursions.by_record.begin(), excursions.by_record.end(),
                    [&](const RecordPeaks& record) { return record.axis == axis && record.exceeds; });
    if (exceeds) axes += (axes.empty() ? "" : ", ") + std::string(axis_name(axis));
  }
  if (axes.empty() && excursions.diverged) return "the present gains may not hold this vehicle in this wind";
  if (axes.empty()) return "it happened between records: the present gains or the wind are the cause";
  return fmt::format("lower the amplitude of {} (hoverwright schedule --amplitude AXIS=PEAK){}", axes,
                     calm ? "" : "; rehearse --calm shows what is left without gusts");
}

void check_log_name(const std::string& name) {
  if (!name.empty() && name != "." && name != ".." && name.find_first_of("/\\") == std::string::npos) return;
  throw Failure(FailureKind::bad_input, fmt::format("'{}' is not the name of a file", name), "--log",
                "give a plain file name; it goes to the study's logs folder");
}

}  // namespace

void run_rehearse(const RehearseCommandOptions& options, std::ostream& out) {
  check_log_name(options.log_name);
  Vehicle vehicle = read_vehicle(vehicle_file(options.study));
  if (options.gains) vehicle.loops = *options.gains;
  require_step(schedule_file(options.study), "schedule");
  const excitation::Schedule schedule = excitation::read_schedule(schedule_file(options.study));

  excitation::RehearsalOptions rehearsal;
  rehearsal.seed = options.seed;
  rehearsal.turbulence = !options.calm;
  const excitation::RehearsalResult result = excitation::rehearse(vehicle, schedule, rehearsal);

  const std::filesystem::path log = options.study / "logs" / options.log_name;
  write_file(log, excitation::log_to_csv(result.log));

  const Weather& weather = vehicle.airframe->weather;
  out << fmt::format("{}: {:.1f} s in {:.1f} m/s of wind from {:.0f} deg, {}, seed {}\n", vehicle.name,
                     schedule.duration_s, weather.wind_m_s, weather.wind_from_deg,
                     options.calm
                         ? std::string("no turbulence")
                         : fmt::format("turbulence of a {:.1f} m/s wind", weather.turbulence_wind_m_s),
                     options.seed);
  print_excursions(out, result.excursions, vehicle);
  out << fmt::format("  log: {} ({} samples)\n", log.string(), result.log.time_s.size());

  if (!result.excursions.exceeded.empty()) {
    std::string problem;
    for (const std::string& sentence : result.excursions.exceeded)
      problem += (problem.empty() ? "" : "; ") + sentence;
    throw Failure(FailureKind::unsupported, problem, log.string(),
                  advice_for(result.excursions, options.calm));
  }
}

}  // namespace hoverwright::ident
