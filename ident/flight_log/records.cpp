// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/records.h"

#include <algorithm>
#include <cmath>
#include <optional>

namespace hoverwright::ident {
namespace {

using Eigen::Index;
using Eigen::VectorXd;

constexpr double kQuiet = 1e-6;  // share of the largest |r| that counts as none: rounding of a text log
constexpr double kResidue =
    1e-4;  // rms share over the energy window that counts as none: an unused channel's noise
constexpr double kLongestPauseS = 0.5;
constexpr double kShortestRecordS = 0.25;
constexpr double kEnergyWindowS = 0.5;
constexpr double kShortestHoldS = 0.04;
constexpr double kTrimS = 3.0;

struct Run {
  Axis axis;
  Index first, last;
};

/// Excitation of one axis as a share of its largest value, and its mean square over the window around each
/// sample.
struct Excited {
  Axis axis;
  VectorXd share;
  VectorXd power;
};

Index in_samples(double seconds, const FlightData& data) {
  return static_cast<Index>(std::lround(seconds * data.sample_rate_hz));
}

VectorXd local_power(const VectorXd& share, Index half_window) {
  VectorXd cumulative(share.size() + 1);
  cumulative[0] = 0.0;
  for (Index i = 0; i < share.size(); ++i) cumulative[i + 1] = cumulative[i] + share[i] * share[i];
  VectorXd power(share.size());
  for (Index i = 0; i < share.size(); ++i) {
    const Index from = std::max<Index>(0, i - half_window);
    const Index to = std::min<Index>(share.size(), i + half_window + 1);
    power[i] = (cumulative[to] - cumulative[from]) / static_cast<double>(to - from);
  }
  return power;
}

std::vector<Excited> excited_axes(const FlightData& data) {
  std::vector<Excited> all;
  for (const Axis axis : kAxes) {
    const auto& signals = data.axes[axis_index(axis)];
    if (!signals || signals->excitation.size() == 0) continue;
    const double largest = signals->excitation.cwiseAbs().maxCoeff();
    if (!(largest > 0.0)) continue;
    const VectorXd share = signals->excitation / largest;
    all.push_back({axis, share, local_power(share, in_samples(0.5 * kEnergyWindowS, data))});
  }
  return all;
}

/// The axis that is excited at sample k, the strongest if there are several.
std::optional<Axis> excited_at(const std::vector<Excited>& all, Index k) {
  const Excited* strongest = nullptr;
  for (const Excited& excited : all) {
    if (std::abs(excited.share[k]) <= kQuiet || excited.power[k] <= kResidue * kResidue) continue;
    if (strongest == nullptr || excited.power[k] > strongest->power[k]) strongest = &excited;
  }
  return strongest == nullptr ? std::nullopt : std::optional(strongest->axis);
}

/// Runs of one axis each, in time order, pauses bridged; they do not overlap.
std::vector<Run> excited_runs(const std::vector<Excited>& all, const FlightData& data) {
  std::vector<Run> runs;
  const Index pause = in_samples(kLongestPauseS, data);
  for (Index k = 0; k < data.samples; ++k) {
    const auto axis = excited_at(all, k);
    if (!axis) continue;
    if (!runs.empty() && runs.back().axis == *axis && k - runs.back().last < pause) {
      runs.back().last = k + 1;
    } else {
      runs.push_back({*axis, k, k + 1});
    }
  }
  const Index shortest = in_samples(kShortestRecordS, data);
  std::erase_if(runs, [shortest](const Run& run) { return run.last - run.first < shortest; });
  return runs;
}

RecordKind kind_of(const VectorXd& share, const FlightData& data) {
  const Index shortest_hold = std::max<Index>(2, in_samples(kShortestHoldS, data));
  Index non_zero = 0;
  Index held = 0;
  for (Index first = 0; first < share.size();) {
    Index end = first + 1;
    while (end < share.size() && std::abs(share[end] - share[first]) <= kQuiet) ++end;
    if (std::abs(share[first]) > kQuiet) {
      non_zero += end - first;
      if (end - first >= shortest_hold) held += end - first;
    }
    first = end;
  }
  return 2 * held > non_zero ? RecordKind::doublet : RecordKind::sweep;
}

}  // namespace

std::vector<Record> find_records(const FlightData& data) {
  const std::vector<Excited> all = excited_axes(data);
  std::vector<Record> records;
  for (const Run& run : excited_runs(all, data)) {
    const auto excited = std::find_if(
        all.begin(), all.end(), [&run](const Excited& candidate) { return candidate.axis == run.axis; });
    Record record;
    record.axis = run.axis;
    record.kind = kind_of(excited->share.segment(run.first, run.last - run.first), data);
    record.first = run.first;
    record.last = run.last;
    records.push_back(record);
  }

  const Index trim = in_samples(kTrimS, data);
  for (std::size_t i = 0; i < records.size(); ++i) {
    Record& record = records[i];
    const Index earliest = i == 0 ? 0 : (records[i - 1].last + record.first + 1) / 2;
    const Index latest =
        i + 1 == records.size() ? data.samples : (record.last + records[i + 1].first + 1) / 2;
    record.span_first = std::max(record.first - trim, earliest);
    record.span_last = std::min(record.last + trim, latest);
  }
  return records;
}

}  // namespace hoverwright::ident
