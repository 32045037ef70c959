// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <filesystem>
#include <optional>
#include <ostream>

namespace hoverwright::ident {

struct InspectOptions {
  std::filesystem::path log;
  std::optional<std::filesystem::path> vehicle;
  bool json = false;  ///< print one JSON object instead of tables
};

/// Tells what is in a log: the time column, each channel's rate, range, missing and clipped share, what it
/// could be mapped to; with a vehicle file what each channel is mapped to, what is missing, and the records
/// found. Trouble in the log is told, not thrown, as long as its columns can be read.
/// @throws Failure (bad_input) when the log or the vehicle file cannot be read, or no column can be time.
void run_inspect(const InspectOptions& options, std::ostream& out);

}  // namespace hoverwright::ident
