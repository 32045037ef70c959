// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/schedule.h"

#include <fmt/format.h>

#include "ident/commands/study.h"
#include "ident/files.h"
#include "ident/vehicle/vehicle.h"
#include "reports/flight_card.h"

namespace hoverwright::ident {
namespace {

using excitation::Chirp;
using excitation::Schedule;
using excitation::ScheduledRecord;

void print_records(std::ostream& out, const Schedule& schedule) {
  out << fmt::format("  {:<8}{:<10}{:>9}{:>13}{:>14}   {}\n", "axis", "kind", "start, s", "duration, s",
                     "amplitude, 1", "band, Hz");
  for (const ScheduledRecord& record : schedule.records) {
    const auto* chirp = std::get_if<Chirp>(&record.signal);
    out << fmt::format("  {:<8}{:<10}{:>9.1f}{:>13.1f}{:>14.4g}   {}\n", axis_name(record.axis),
                       chirp != nullptr ? "chirp" : "doublet", record.start_s, record.duration_s(),
                       record.amplitude(),
                       chirp != nullptr ? fmt::format("{:.4g} to {:.4g}", chirp->low_hz, chirp->high_hz)
                                        : std::string("validation only"));
  }
}

void print_budget(std::ostream& out, const Schedule& schedule) {
  const double needed_s = schedule.duration_s + schedule.reserve_s;
  out << fmt::format(
      "  time: {:.1f} s of schedule + {:.1f} s of reserve = {:.1f} s, {:.1f} s below the battery's {:.1f} "
      "s\n",
      schedule.duration_s, schedule.reserve_s, needed_s, schedule.endurance_s - needed_s,
      schedule.endurance_s);
}

}  // namespace

void run_schedule(const ScheduleCommandOptions& options, std::ostream& out) {
  const std::filesystem::path vehicle_path = vehicle_file(options.study);
  const Vehicle vehicle = read_vehicle(vehicle_path);
  const Schedule schedule = excitation::plan_schedule(vehicle, options.plan);

  const std::string json = excitation::schedule_to_json(schedule, options.plan, sha256_of_file(vehicle_path));
  const std::string playback = excitation::playback_csv(schedule);
  const std::string card = reports::flight_card_html(schedule, vehicle);
  const std::filesystem::path playback_path = options.study / "playback" / "schedule.csv";
  const std::filesystem::path card_path = options.study / "flight_card.html";
  write_file(playback_path, playback);
  write_file(card_path, card);
  write_file(schedule_file(options.study), json);

  out << fmt::format("{}: {} records at {:.4g} Hz\n", vehicle.name, schedule.records.size(),
                     schedule.sample_rate_hz);
  print_records(out, schedule);
  print_budget(out, schedule);
  for (const std::string& caution : schedule.cautions) out << "  Caution: " << caution << "\n";
  out << "  flight card: " << card_path.string() << "\n";
  out << "  playback: " << playback_path.string() << "\n";
}

}  // namespace hoverwright::ident
