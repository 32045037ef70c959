// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/flight_data.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "ident/failure.h"
#include "ident/flight_log/time_grid.h"
#include "ident/strict_json.h"
#include "ident/vehicle/units.h"

namespace hoverwright::ident {
namespace {

using Eigen::Index;
using Eigen::VectorXd;

constexpr Index kFewestSamples = 16;
constexpr double kMostMissing = 0.01;
constexpr Index kLongestMissingRun = static_cast<Index>(kGapPeriods);
constexpr double kRateTolerance = 0.01;

/// Rows of the log that are used and their times since the log's first stamp.
struct Rows {
  std::vector<Index> row;
  VectorXd time_s;
};

[[noreturn]] void fail(const LogTable& log, const std::string& problem, const std::string& advice = "") {
  throw Failure(FailureKind::bad_input, problem, log.source.string(), advice);
}

std::string plural(long count, std::string_view noun) {
  return fmt::format("{} {}{}", count, noun, count == 1 ? "" : "s");
}

/// Column of the log by name; `role` says what it is needed for.
std::size_t find_column(const LogTable& log, const std::string& name, const std::string& role) {
  const auto found = std::find(log.names.begin(), log.names.end(), name);
  if (found != log.names.end()) return static_cast<std::size_t>(found - log.names.begin());
  fail(log, fmt::format("no column \"{}\", which the vehicle file names as {}", name, role),
       fmt::format("The nearest column name is \"{}\".",
                   nearest_word(name, {log.names.begin(), log.names.end()})));
}

/// Seconds to the millisecond, in words a damaged time stamp cannot make longer than the line.
std::string seconds(double value) {
  return std::abs(value) < 1e9 ? fmt::format("{:.3f} s", value) : fmt::format("{:.4g} s", value);
}

/// "--from 1.5 --to 12.25", rounded inwards to milliseconds.
std::string range_options(double from_s, double to_s) {
  return fmt::format("--from {:.3f} --to {:.3f}", std::ceil(from_s * 1e3) * 1e-3,
                     std::floor(to_s * 1e3) * 1e-3);
}

/// Seconds since the first stamp; a missing time cell stays NaN.
VectorXd relative_time(const LogTable& log, std::size_t column, double unit_s) {
  const VectorXd& stamps = log.columns[column];
  const auto first =
      std::find_if(stamps.begin(), stamps.end(), [](double stamp) { return std::isfinite(stamp); });
  if (first == stamps.end())
    fail(log, fmt::format("the time column \"{}\" holds no number", log.names[column]));
  // Subtract first: an epoch time in seconds leaves 2.4e-7 s of resolution, and multiplying would spend some
  // of it.
  return (stamps.array() - *first) * unit_s;
}

Rows select_rows(const LogTable& log, std::size_t time_column, double unit_s, const TimeRange& range,
                 std::vector<std::string>& warnings) {
  const VectorXd time = relative_time(log, time_column, unit_s);
  double latest = 0.0;
  for (const double t : time) latest = std::isfinite(t) ? std::max(latest, t) : latest;
  if (range.to_s && !(*range.to_s > range.from_s)) {
    fail(log, fmt::format("the time range from {} s to {} s is empty", range.from_s, *range.to_s), "");
  }

  std::vector<Index> rows;
  long missing = 0;
  long repeated = 0;
  for (Index i = 0; i < time.size(); ++i) {
    if (std::isnan(time[i])) {
      ++missing;
      continue;
    }
    // Without a start, stamps before the first one are time going backwards, not samples outside the range.
    if ((range.from_s > 0.0 && time[i] < range.from_s) || (range.to_s && time[i] > *range.to_s)) continue;
    if (!rows.empty() && time[i] < time[rows.back()]) {
      fail(log,
           fmt::format("time goes backwards by {:.4g} s at data row {}, {} after the start",
                       time[rows.back()] - time[i], i + 1, seconds(time[rows.back()])),
           "Split the log there, or choose a part of it with --from and --to.");
    }
    if (!rows.empty() && time[i] == time[rows.back()]) {
      ++repeated;
      continue;
    }
    rows.push_back(i);
  }
  const auto count = static_cast<Index>(rows.size());
  if (count < kFewestSamples) {
    fail(log,
         fmt::format("{} with a time of their own in the range, at least {} are needed",
                     plural(static_cast<long>(count), "sample"), kFewestSamples),
         fmt::format("The log covers 0 to {} after its first time stamp; check the time's unit too.",
                     seconds(latest)));
  }
  if (missing > 0) warnings.push_back(plural(missing, "row") + " without a time stamp left out");
  if (repeated > 0) {
    warnings.push_back(fmt::format(
        "{} with the time stamp of the sample before left out ({:.1f} %)", plural(repeated, "sample"),
        100.0 * static_cast<double>(repeated) / static_cast<double>(count + repeated)));
  }
  return {rows, time(rows)};
}

void check_gaps(const LogTable& log, const VectorXd& time_s, double period_s) {
  Index gaps = 0;
  Index widest = 0;  // gap between this sample and the next
  Index piece_first = 0, best_first = 0, best_last = 0;
  for (Index i = 0; i + 1 < time_s.size(); ++i) {
    const double step = time_s[i + 1] - time_s[i];
    if (step > kGapPeriods * period_s) {
      if (gaps == 0 || step > time_s[widest + 1] - time_s[widest]) widest = i;
      ++gaps;
      piece_first = i + 1;
    } else if (time_s[i + 1] - time_s[piece_first] > time_s[best_last] - time_s[best_first]) {
      best_first = piece_first;
      best_last = i + 1;
    }
  }
  if (gaps == 0) return;
  fail(log,
       fmt::format("the samples have {}; the longest is {} after {}, {:.5g} sample periods",
                   plural(static_cast<long>(gaps), "gap"), seconds(time_s[widest + 1] - time_s[widest]),
                   seconds(time_s[widest]), (time_s[widest + 1] - time_s[widest]) / period_s),
       fmt::format("The longest part without a gap: {}",
                   range_options(time_s[best_first], time_s[best_last])));
}

/// One channel on the grid in SI units; single missing cells filled.
VectorXd take_channel(const LogTable& log, const Channel& channel, double to_si, const std::string& role,
                      const Rows& rows, const TimeGrid& grid, std::vector<std::string>& warnings) {
  VectorXd values = log.columns[find_column(log, channel.name, role)](rows.row);
  const Index samples = values.size();
  Index missing = 0;
  Index longest = 0, longest_first = 0;
  for (Index i = 0; i < samples; ++i) {
    if (std::isfinite(values[i])) continue;
    Index end = i;
    while (end < samples && !std::isfinite(values[end])) ++end;
    missing += end - i;
    if (end - i > longest) {
      longest = end - i;
      longest_first = i;
    }
    // Linear in time between the neighbours; at the ends the one neighbour there is.
    for (Index k = i; k < end; ++k) {
      if (i == 0) {
        values[k] = end < samples ? values[end] : 0.0;
      } else if (end == samples) {
        values[k] = values[i - 1];
      } else {
        const double w = (rows.time_s[k] - rows.time_s[i - 1]) / (rows.time_s[end] - rows.time_s[i - 1]);
        values[k] = (1.0 - w) * values[i - 1] + w * values[end];
      }
    }
    i = end;
  }
  const double share = static_cast<double>(missing) / static_cast<double>(samples);
  if (share > kMostMissing || longest > kLongestMissingRun) {
    fail(log,
         fmt::format(
             "column \"{}\" ({}) lacks {:.1f} % of its values in the range, up to {} in a row after {}",
             channel.name, role, 100.0 * share, longest, seconds(rows.time_s[longest_first])),
         "Choose a part of the log with --from and --to, or log the channel at the full rate.");
  }
  if (missing > 0) {
    warnings.push_back(fmt::format("column \"{}\": {} filled by interpolation", channel.name,
                                   plural(static_cast<long>(missing), "missing cell")));
  }
  return grid.resample(values) * (channel.scale * to_si);
}

double output_factor(const Channel& channel) {
  for (const Quantity quantity : {Quantity::rate, Quantity::acceleration, Quantity::velocity}) {
    if (const auto factor = unit_to_si(channel.unit, quantity)) return *factor;
  }
  throw Failure(FailureKind::bad_input, fmt::format("the unit \"{}\" is not one of an output", channel.unit),
                fmt::format("channel \"{}\"", channel.name), "");
}

void tell_timing(const TimeGrid& grid, const Control& control, std::vector<std::string>& warnings) {
  const double rate_hz = 1.0 / grid.period_s;
  if (grid.stamp_step_s) {
    warnings.push_back(
        fmt::format("the time stamps are rounded to {:.3g} ms: the samples are taken as evenly spaced",
                    *grid.stamp_step_s * 1e3));
  }
  if (grid.moved > 0) {
    warnings.push_back(
        fmt::format("{} of {} more than a tenth of a period off the even {:.4g} Hz grid: the signals were "
                    "interpolated there",
                    plural(grid.moved, "sample"), grid.before.size(), rate_hz));
  }
  if (grid.lost > 0) warnings.push_back(plural(grid.lost, "lost sample") + " filled by interpolation");
  if (std::abs(rate_hz / control.sample_rate_hz - 1.0) > kRateTolerance) {
    warnings.push_back(fmt::format(
        "the log runs at {:.4g} Hz, the controller at {:.4g} Hz: what happens between the samples of the log "
        "is not known, so do not trust the range near {:.4g} Hz",
        rate_hz, control.sample_rate_hz, 0.5 * std::min(rate_hz, control.sample_rate_hz)));
  }
}

}  // namespace

FlightData map_log(const LogTable& log, const Vehicle& vehicle, const TimeRange& range) {
  const std::size_t time_column = find_column(log, vehicle.time.name, "the time");
  const auto time_unit_s = unit_to_si(vehicle.time.unit, Quantity::time);
  if (!time_unit_s) fail(log, fmt::format("the unit \"{}\" is not one of time", vehicle.time.unit));

  FlightData data;
  const Rows rows = select_rows(log, time_column, *time_unit_s, range, data.warnings);
  const Index count = rows.time_s.size();
  const VectorXd steps = rows.time_s.tail(count - 1) - rows.time_s.head(count - 1);
  const double period_s = sample_period({steps.begin(), steps.end()}, 1.0 / vehicle.control.sample_rate_hz);
  check_gaps(log, rows.time_s, period_s);
  const TimeGrid grid = make_time_grid(rows.time_s, period_s);

  data.sample_rate_hz = 1.0 / period_s;
  data.start_s = grid.start_s;
  data.samples = static_cast<Index>(grid.before.size());
  tell_timing(grid, vehicle.control, data.warnings);
  for (const Axis axis : kAxes) {
    const auto& setup = vehicle.axes[axis_index(axis)];
    if (!setup) continue;
    const auto take = [&](const Channel& channel, double to_si, std::string_view role) {
      return take_channel(log, channel, to_si, fmt::format("the {} of {}", role, axis_name(axis)), rows, grid,
                          data.warnings);
    };
    AxisSignals signals;
    const AxisChannels& channels = setup->channels;
    if (channels.excitation) signals.excitation = take(*channels.excitation, 1.0, "excitation");
    signals.demand = take(channels.demand, 1.0, "demand");
    signals.output = take(channels.output, output_factor(channels.output), "output");
    data.axes[axis_index(axis)] = std::move(signals);
  }
  return data;
}

}  // namespace hoverwright::ident
