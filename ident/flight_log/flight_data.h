// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <array>
#include <optional>
#include <string>
#include <vector>

#include "ident/flight_log/csv_reader.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::ident {

/// Part of a log, seconds from its first time stamp. Whole log by default.
struct TimeRange {
  double from_s = 0.0;
  std::optional<double> to_s;
};

/// Signals of one axis in SI units on the uniform grid, all of one length. `excitation` is empty when not
/// logged.
struct AxisSignals {
  Eigen::VectorXd excitation;
  Eigen::VectorXd demand;
  Eigen::VectorXd output;
};

/// A log mapped by a vehicle file: SI units, uniform time.
struct FlightData {
  double sample_rate_hz = 0.0;
  double start_s = 0.0;  ///< of the first sample, seconds from the log's first time stamp
  Eigen::Index samples = 0;
  std::array<std::optional<AxisSignals>, 4> axes;
  std::vector<std::string> warnings;  ///< repaired jitter, dropped duplicates, filled cells: counted and told

  [[nodiscard]] double time_s(Eigen::Index sample) const {
    return start_s + static_cast<double>(sample) / sample_rate_hz;
  }
};

/// Maps and converts the channels and brings them to a uniform grid at the log's own rate (see time_grid.h).
/// Samples within a tenth of a period of the grid are taken as they are, elsewhere the signals are
/// interpolated linearly in time; how many samples that concerns is told in a warning. So are repeated time
/// stamps (the first sample is kept), single missing cells (filled by linear interpolation), and a log rate
/// that differs from control.sample_rate_hz by more than 1 %.
/// @throws Failure (bad_input): missing column, an empty range, time going backwards, fewer than 16 samples
/// in the range, a gap of more than 5 sample periods inside the range (naming it and the --from/--to that
/// avoids it), more than 1 % missing cells or more than 5 in a row in a used column.
FlightData map_log(const LogTable& log, const Vehicle& vehicle, const TimeRange& range);

}  // namespace hoverwright::ident
