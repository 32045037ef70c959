// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/time_grid.h"

#include <algorithm>
#include <cmath>
#include <iterator>
#include <numeric>
#include <set>

namespace hoverwright::ident {
namespace {

using Eigen::Index;
using Eigen::VectorXd;

/// A stamp this close to its grid point, in periods, is taken as lying on it.
constexpr double kOnGrid = 0.1;

double mean_of_steps_up_to(const std::vector<double>& sorted, double low, double high) {
  double sum = 0.0;
  long count = 0;
  for (const double step : sorted) {
    if (step < low || step > high) continue;
    sum += step;
    ++count;
  }
  return sum / static_cast<double>(count);
}

/// Total time over the count of periods, gaps left out. Stamps are counted against an even grid that follows
/// them slowly, not step by step: the jitter of a stamp makes one step longer and the next shorter, and must
/// not be counted twice.
double period_by_counting(const std::vector<double>& steps, double rough_period) {
  constexpr double kSlowest =
      0.1;  // share of a stamp's deviation that the grid follows, after the first few stamps
  double total = 0.0;
  double periods = 0.0;
  double deviation = 0.0;  // of the last stamp from the grid
  double stamps = 1.0;     // since the last gap
  for (const double step : steps) {
    if (step > kGapPeriods * rough_period) {
      deviation = 0.0;
      stamps = 1.0;
      continue;
    }
    const double counted = std::round((deviation + step) / rough_period);
    total += step;
    periods += counted;
    stamps += 1.0;
    deviation = (1.0 - std::max(kSlowest, 1.0 / stamps)) * (deviation + step - counted * rough_period);
  }
  return total / periods;
}

bool agree(double period, double expected) {
  return std::abs(period / expected - 1.0) <= 0.01;
}

/// Number of the grid point each stamp belongs to.
std::vector<Index> grid_numbers(const VectorXd& time_s, double period_s) {
  const Index samples = time_s.size();
  const double periods = (time_s[samples - 1] - time_s[0]) / period_s;
  const bool none_lost = std::abs(periods - static_cast<double>(samples - 1)) < 0.5;
  std::vector<Index> numbers(static_cast<std::size_t>(samples));
  for (Index i = 0; i < samples; ++i) {
    numbers[static_cast<std::size_t>(i)] =
        none_lost ? i : static_cast<Index>(std::lround((time_s[i] - time_s[0]) / period_s));
  }
  return numbers;
}

/// The step of the clock, when the stamps look like an even one rounded: two or three different steps, evenly
/// apart (as 2 and 3 ms at 400 Hz), and no deviation larger than their spacing. Steps that are whole periods
/// are no rounding.
std::optional<double> rounding_step(const VectorXd& time_s, const VectorXd& deviation_s, double period_s) {
  constexpr double kResolution = 1e-6;  // s; epoch times in doubles resolve 2.4e-7 s
  std::set<long long> steps;
  for (Index i = 1; i < time_s.size(); ++i) {
    steps.insert(std::llround((time_s[i] - time_s[i - 1]) / kResolution));
    if (steps.size() > 3) return std::nullopt;
  }
  if (steps.size() < 2) return std::nullopt;
  const long long spacing = *std::next(steps.begin()) - *steps.begin();
  if (steps.size() == 3 && std::llabs(*steps.rbegin() - *std::next(steps.begin()) - spacing) > 1)
    return std::nullopt;
  const double step_s = static_cast<double>(spacing) * kResolution;
  const double largest = deviation_s.cwiseAbs().maxCoeff();
  if (step_s >= period_s || largest <= kOnGrid * period_s || largest > step_s + kResolution)
    return std::nullopt;
  return step_s;
}

}  // namespace

double sample_period(const std::vector<double>& steps, std::optional<double> expected_s) {
  std::vector<double> sorted = steps;
  std::sort(sorted.begin(), sorted.end());
  const double median = sorted[sorted.size() / 2];
  // 1.6 and not 1.5: at 400 Hz a clock of 1 ms gives steps of 2 and 3 ms, and the median may be either.
  const double rough = mean_of_steps_up_to(sorted, 0.5 * median, 1.6 * median);
  const double period = period_by_counting(steps, rough);
  if (!expected_s || agree(period, *expected_s)) return period;
  const double mean = std::accumulate(steps.begin(), steps.end(), 0.0) / static_cast<double>(steps.size());
  return agree(mean, *expected_s) ? mean : period;
}

VectorXd TimeGrid::resample(const VectorXd& signal) const {
  VectorXd values(static_cast<Index>(before.size()));
  for (Index k = 0; k < values.size(); ++k) {
    const auto at = static_cast<std::size_t>(k);
    const Index i = before[at];
    const double w = weight[at];
    values[k] = w == 0.0 ? signal[i] : (1.0 - w) * signal[i] + w * signal[i + 1];
  }
  return values;
}

TimeGrid make_time_grid(const VectorXd& time_s, double period_s) {
  const Index samples = time_s.size();
  const std::vector<Index> numbers = grid_numbers(time_s, period_s);
  VectorXd deviation(samples);
  for (Index i = 0; i < samples; ++i) {
    const auto number = static_cast<double>(numbers[static_cast<std::size_t>(i)]);
    deviation[i] = time_s[i] - time_s[0] - number * period_s;
  }
  TimeGrid grid;
  grid.period_s = period_s;
  grid.start_s = time_s[0] + deviation.mean();
  deviation.array() -= deviation.mean();
  grid.stamp_step_s = rounding_step(time_s, deviation, period_s);

  const auto points = static_cast<std::size_t>(numbers.back() + 1);
  constexpr Index kNone = -1;
  std::vector<Index> on_grid(points, kNone);
  std::vector<bool> has_sample(points, false);
  for (Index i = 0; i < samples; ++i) {
    const auto number = static_cast<std::size_t>(numbers[static_cast<std::size_t>(i)]);
    has_sample[number] = true;
    if (grid.stamp_step_s || std::abs(deviation[i]) <= kOnGrid * period_s) {
      on_grid[number] = i;
    } else {
      ++grid.moved;
    }
  }
  grid.lost = static_cast<long>(std::count(has_sample.begin(), has_sample.end(), false));

  Index i = 0;  // last stamp at or before the grid point
  for (std::size_t k = 0; k < points; ++k) {
    const double at_s = grid.start_s + static_cast<double>(k) * period_s;
    while (i + 2 < samples && time_s[i + 1] <= at_s) ++i;
    const double weight = (at_s - time_s[i]) / (time_s[i + 1] - time_s[i]);
    // Only the first and last grid point can lie outside the stamps, by the mean deviation: the end samples
    // stand for them.
    grid.before.push_back(on_grid[k] == kNone ? i : on_grid[k]);
    grid.weight.push_back(on_grid[k] == kNone ? std::clamp(weight, 0.0, 1.0) : 0.0);
  }
  return grid;
}

}  // namespace hoverwright::ident
