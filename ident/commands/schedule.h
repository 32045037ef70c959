// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <filesystem>
#include <ostream>

#include "excitation/schedule/schedule.h"

namespace hoverwright::ident {

struct ScheduleCommandOptions {
  std::filesystem::path study;
  excitation::ScheduleOptions plan;
};

/// Reads study/vehicle.json, writes study/schedule.json, study/playback/schedule.csv and
/// study/flight_card.html, and prints the records, the time budget and the cautions. All three files are
/// ready in memory before the first is written; schedule.json, which the other commands read, is written
/// last.
/// @throws Failure (bad_input) from the vehicle file, the options or the folder; earlier results then stay.
void run_schedule(const ScheduleCommandOptions& options, std::ostream& out);

}  // namespace hoverwright::ident
