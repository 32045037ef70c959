// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "ident/flight_log/csv_reader.h"

namespace hoverwright::ident {

/// What can be said about the time column.
struct TimeHealth {
  std::string name;
  double unit_s = 1.0;  ///< seconds per unit assumed
  bool epoch = false;   ///< starts after 2001-09-09 when read as seconds since 1970 (1e9 s)
  long samples = 0;
  double duration_s = 0.0;
  double rate_hz = 0.0;           ///< from the ordinary steps, see sample_period in time_grid.h
  double jitter_s = 0.0;          ///< rms of the step about the sample period, gaps excluded
  double longest_gap_s = 0.0;     ///< longest step between two stamps
  double longest_gap_at_s = 0.0;  ///< where it begins, from the first stamp
  long duplicates = 0;
  long backward_steps = 0;
};

/// What can be said about one data column.
struct ChannelHealth {
  std::string name;
  double mean = 0.0, standard_deviation = 0.0, minimum = 0.0, maximum = 0.0;  ///< over finite values
  double missing_share = 0.0;
  bool constant = false;
  std::optional<double> step;  ///< smallest change, when the values sit on a coarse grid
  double clipped_share = 0.0;  ///< share of samples in runs of at least 3 at the minimum or maximum
  double update_hz = 0.0;      ///< how often the value changes
};

/// The time column is `time_name` or, if empty, the first strictly rising column, one named like a time ("t",
/// "...time...") before others; failing that, one so named that rises in at least 95 % of its steps.
/// @throws Failure (bad_input) when no column can be time.
TimeHealth examine_time(const LogTable& log, const std::string& time_name, double unit_s);

/// All columns but the time.
std::vector<ChannelHealth> examine_channels(const LogTable& log, const TimeHealth& time);

}  // namespace hoverwright::ident
