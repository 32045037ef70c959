// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <optional>
#include <vector>

namespace hoverwright::ident {

/// A step longer than this many sample periods is a gap.
inline constexpr double kGapPeriods = 5.0;

/// Sample period behind time steps (at least one, all > 0, in order) that jitter, that are rounded to a
/// coarse clock, or that skip lost samples: median step, then mean of the steps near it, then total time over
/// the count of periods, gaps left out. When that is not within 1 % of `expected_s` but the plain mean step
/// is, the mean is taken: stamps rounded to nearly the period itself look like lost samples.
double sample_period(const std::vector<double>& steps, std::optional<double> expected_s = std::nullopt);

/// Rising time stamps brought to uniform spacing. Grid point k lies at start_s + k period_s and has the value
/// (1 - weight[k]) x[before[k]] + weight[k] x[before[k] + 1] of a signal x on the stamps; weight 0 takes a
/// sample as it is.
struct TimeGrid {
  double start_s = 0.0;
  double period_s = 0.0;
  std::vector<Eigen::Index> before;
  std::vector<double> weight;
  long moved = 0;  ///< stamps more than a tenth of a period off the grid
  long lost = 0;   ///< grid points no sample belongs to
  std::optional<double>
      stamp_step_s;  ///< set when the stamps are an even clock rounded to this step; moved is 0 then

  [[nodiscard]] Eigen::VectorXd resample(const Eigen::VectorXd& signal) const;
};

/// `time_s` strictly rising, at least two stamps, free of gaps.
TimeGrid make_time_grid(const Eigen::VectorXd& time_s, double period_s);

}  // namespace hoverwright::ident
