// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/channel_health.h"

#include <fmt/format.h>

#include <algorithm>
#include <cctype>
#include <cmath>

#include "ident/failure.h"
#include "ident/flight_log/time_grid.h"

namespace hoverwright::ident {
namespace {

using Eigen::Index;
using Eigen::VectorXd;

constexpr double kEpochS = 1e9;         // 2001-09-09, as seconds since 1970
constexpr double kMostlyRising = 0.95;  // share of rising steps of a time column with repeated stamps
constexpr double kCoarsestLevels =
    1000.0;  // a grid with more levels between minimum and maximum is not coarse
constexpr Index kShortestClip = 3;

VectorXd finite_values(const VectorXd& column) {
  VectorXd values(column.size());
  Index count = 0;
  for (const double value : column) {
    if (std::isfinite(value)) values[count++] = value;
  }
  values.conservativeResize(count);
  return values;
}

/// Share of steps of the column that rise; 0 for columns that are hardly filled.
double rising_share(const VectorXd& column) {
  const VectorXd values = finite_values(column);
  if (values.size() < 2 || 2 * values.size() < column.size()) return 0.0;
  Index rising = 0;
  for (Index i = 1; i < values.size(); ++i) rising += values[i] > values[i - 1] ? 1 : 0;
  return static_cast<double>(rising) / static_cast<double>(values.size() - 1);
}

bool named_like_time(std::string name) {
  std::transform(name.begin(), name.end(), name.begin(),
                 [](unsigned char c) { return static_cast<char>(std::tolower(c)); });
  return name == "t" || name.find("time") != std::string::npos;
}

/// Strictly rising columns first, those named like a time before the others, then mostly rising ones.
std::size_t find_time(const LogTable& log) {
  std::optional<std::size_t> best;
  int best_rank = 0;
  for (std::size_t c = 0; c < log.names.size(); ++c) {
    const double share = rising_share(log.columns[c]);
    const bool named = named_like_time(log.names[c]);
    const int rank = share == 1.0 ? (named ? 3 : 2) : (share >= kMostlyRising && named ? 1 : 0);
    if (rank > best_rank) {
      best = c;
      best_rank = rank;
    }
  }
  if (best) return *best;
  throw Failure(FailureKind::bad_input, "no column rises from row to row, as time would", log.source.string(),
                "Name the time column in a vehicle file and give that with --vehicle.");
}

/// Distance of the grid the values sit on, when it is coarse.
std::optional<double> coarse_step(VectorXd values) {
  std::sort(values.begin(), values.end());
  const double range = values[values.size() - 1] - values[0];
  double step = range;
  for (Index i = 1; i < values.size(); ++i) {
    const double difference = values[i] - values[i - 1];
    // Differences below a thousandth of the coarsest accepted step are the rounding of the text.
    if (difference > 1e-3 * range / kCoarsestLevels) step = std::min(step, difference);
  }
  if (range / step > kCoarsestLevels) return std::nullopt;
  // Values written with few digits miss the grid a little: a tenth of a step is allowed at every value.
  const double anchor = values[0];
  double worst = 0.0;
  for (const double value : values) {
    const double steps = (value - anchor) / step;
    worst = std::max(worst, std::abs(steps - std::round(steps)));
  }
  return worst <= 0.1 ? std::optional(step) : std::nullopt;
}

double clipped_share(const VectorXd& values, double minimum, double maximum) {
  Index clipped = 0;
  for (Index first = 0; first < values.size();) {
    Index end = first + 1;
    while (end < values.size() && values[end] == values[first]) ++end;
    const bool at_end = values[first] == minimum || values[first] == maximum;
    if (at_end && end - first >= kShortestClip) clipped += end - first;
    first = end;
  }
  return static_cast<double>(clipped) / static_cast<double>(values.size());
}

ChannelHealth examine_channel(const std::string& name, const VectorXd& column, double duration_s) {
  ChannelHealth health;
  health.name = name;
  const VectorXd values = finite_values(column);
  health.missing_share =
      static_cast<double>(column.size() - values.size()) / static_cast<double>(column.size());
  if (values.size() == 0) return health;
  health.minimum = values.minCoeff();
  health.maximum = values.maxCoeff();
  // About the minimum first, so that a large constant part costs no digits.
  const VectorXd above = values.array() - health.minimum;
  const double mean_above = above.mean();
  health.mean = health.minimum + mean_above;
  health.standard_deviation = std::sqrt((above.array() - mean_above).square().mean());
  health.constant = health.minimum == health.maximum;
  if (health.constant) return health;
  health.step = coarse_step(values);
  health.clipped_share = clipped_share(values, health.minimum, health.maximum);
  Index changes = 0;
  for (Index i = 1; i < values.size(); ++i) changes += values[i] != values[i - 1] ? 1 : 0;
  if (duration_s > 0.0) health.update_hz = static_cast<double>(changes) / duration_s;
  return health;
}

}  // namespace

TimeHealth examine_time(const LogTable& log, const std::string& time_name, double unit_s) {
  const std::size_t column = time_name.empty() ? find_time(log) : log.find(time_name);
  TimeHealth health;
  health.name = log.names[column];
  health.unit_s = unit_s;
  const VectorXd stamps = finite_values(log.columns[column]);
  health.samples = static_cast<long>(stamps.size());
  std::vector<double> steps;
  for (Index i = 1; i < stamps.size(); ++i) {
    const double step = (stamps[i] - stamps[i - 1]) * unit_s;
    if (step < 0.0) ++health.backward_steps;
    if (step == 0.0) ++health.duplicates;
    if (step <= 0.0) continue;
    steps.push_back(step);
    if (step > health.longest_gap_s) {
      health.longest_gap_s = step;
      health.longest_gap_at_s = (stamps[i - 1] - stamps[0]) * unit_s;
    }
  }
  if (steps.empty()) {
    throw Failure(
        FailureKind::bad_input, fmt::format("the column \"{}\" never rises: it is no time", health.name),
        log.source.string(), "Name the time column in a vehicle file and give that with --vehicle.");
  }
  health.epoch = stamps[0] * unit_s >= kEpochS;
  health.duration_s = (stamps.maxCoeff() - stamps.minCoeff()) * unit_s;
  const double period_s = sample_period(steps);
  health.rate_hz = 1.0 / period_s;
  double square_sum = 0.0;
  long ordinary = 0;
  for (const double step : steps) {
    if (step > kGapPeriods * period_s) continue;
    square_sum += (step - period_s) * (step - period_s);
    ++ordinary;
  }
  health.jitter_s = std::sqrt(square_sum / static_cast<double>(ordinary));
  return health;
}

std::vector<ChannelHealth> examine_channels(const LogTable& log, const TimeHealth& time) {
  std::vector<ChannelHealth> channels;
  for (std::size_t c = 0; c < log.names.size(); ++c) {
    if (log.names[c] == time.name) continue;
    channels.push_back(examine_channel(log.names[c], log.columns[c], time.duration_s));
  }
  return channels;
}

}  // namespace hoverwright::ident
