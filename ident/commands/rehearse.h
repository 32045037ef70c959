// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <cstdint>
#include <filesystem>
#include <optional>
#include <ostream>
#include <string>

#include "ident/loop_gains.h"

namespace hoverwright::ident {

struct RehearseCommandOptions {
  std::filesystem::path study;
  std::uint64_t seed = 1;                  ///< of gusts and sensor noise
  std::string log_name = "rehearsal.csv";  ///< file in study/logs
  bool calm = false;                       ///< steady wind without turbulence
  std::optional<LoopGainSet> gains;        ///< flown instead of the vehicle file's present gains
};

/// Flies study/schedule.json with study/vehicle.json in simulation, writes study/logs/<log_name> and prints
/// the excursions against the limits.
/// @throws Failure (unsupported), after the log is written, when a limit was exceeded or the vehicle was
/// lost, naming limit, record and time; Failure (bad_input) when a file is missing or wrong.
void run_rehearse(const RehearseCommandOptions& options, std::ostream& out);

}  // namespace hoverwright::ident
