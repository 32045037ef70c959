// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/excursions.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>

namespace hoverwright::excitation {

namespace {

/// One quantity that has a limit, over the whole log.
struct Watched {
  const char* name;
  const char* unit;
  Eigen::VectorXd size;
  double limit;
  double Peaks::*peak;
};

/// Largest demand of the four axes about their means: excitation has no mean, so the mean is the trim.
Eigen::VectorXd demand_about_trim(const FlightLog& log) {
  if (log.demand.rows() == 0) return {};
  const Eigen::RowVector4d trim = log.demand.colwise().mean();
  return (log.demand.rowwise() - trim).cwiseAbs().rowwise().maxCoeff();
}

std::array<Watched, 5> watch(const FlightLog& log, const TrueMotion& motion, const ident::Limits& limits) {
  return {Watched{"tilt", "deg", motion.tilt_deg, limits.tilt_deg, &Peaks::tilt_deg},
          Watched{"rate", "deg/s", motion.rate_deg_s, limits.rate_deg_s, &Peaks::rate_deg_s},
          Watched{"demand", "(normalised)", demand_about_trim(log), limits.demand, &Peaks::demand},
          Watched{"drift", "m", motion.drift_m, limits.drift_m, &Peaks::drift_m},
          Watched{"climb", "m", motion.climb_m.cwiseAbs(), limits.climb_m, &Peaks::climb_m}};
}

/// "in roll chirp 1", or between which records.
std::string where_in_schedule(const Schedule& schedule, double time_s) {
  std::string before;
  for (const ScheduledRecord& record : schedule.records) {
    if (time_s < record.start_s) return fmt::format("before {}", record.name);
    if (time_s <= record.start_s + record.duration_s()) return fmt::format("in {}", record.name);
    before = record.name;
  }
  return before.empty() ? "in hover" : fmt::format("after {}", before);
}

std::string exceeded_sentence(const Watched& watched, const FlightLog& log, const Schedule& schedule) {
  Eigen::Index worst = 0;
  const double peak = watched.size.maxCoeff(&worst);
  Eigen::Index first = 0;
  while (!(watched.size(first) > watched.limit)) ++first;
  std::string sentence = fmt::format("{} reached {:.3g} {} at {:.1f} s, {}; the limit is {:.3g}",
                                     watched.name, peak, watched.unit, log.time_s(worst),
                                     where_in_schedule(schedule, log.time_s(worst)), watched.limit);
  if (first != worst) {
    sentence += fmt::format(", first passed at {:.1f} s, {}", log.time_s(first),
                            where_in_schedule(schedule, log.time_s(first)));
  }
  return sentence;
}

RecordPeaks peaks_of_record(const ScheduledRecord& record, const std::array<Watched, 5>& watched,
                            double sample_rate_hz) {
  RecordPeaks result;
  result.record = record.name;
  result.axis = record.axis;
  const Eigen::Index rows = watched.front().size.size();
  const auto row_at = [&](double t) {
    return std::clamp(static_cast<Eigen::Index>(std::llround(t * sample_rate_hz)), Eigen::Index{0}, rows);
  };
  const Eigen::Index from = row_at(record.start_s);
  const Eigen::Index count = row_at(record.start_s + record.duration_s()) - from;
  if (count == 0) return result;  // the flight ended before this record
  for (const Watched& quantity : watched) {
    result.peaks.*quantity.peak = quantity.size.segment(from, count).maxCoeff();
    result.exceeds = result.exceeds || result.peaks.*quantity.peak > quantity.limit;
  }
  return result;
}

}  // namespace

Excursions find_excursions(const FlightLog& log, const TrueMotion& motion, const Schedule& schedule,
                           const ident::Limits& limits, bool diverged) {
  Excursions excursions;
  excursions.diverged = diverged;
  const Eigen::Index rows = log.time_s.size();
  if (diverged) {
    const double end_s = static_cast<double>(rows) / log.sample_rate_hz;
    excursions.exceeded.push_back(rows == 0 ? std::string("the vehicle was lost before the first record")
                                            : fmt::format("the vehicle was lost at {:.1f} s, {}", end_s,
                                                          where_in_schedule(schedule, end_s)));
  }
  if (rows == 0) return excursions;

  const std::array<Watched, 5> watched = watch(log, motion, limits);
  for (const Watched& quantity : watched) {
    excursions.*quantity.peak = quantity.size.maxCoeff();
    if (excursions.*quantity.peak > quantity.limit)
      excursions.exceeded.push_back(exceeded_sentence(quantity, log, schedule));
  }
  excursions.saturated_share = static_cast<double>(log.saturated.count()) / static_cast<double>(rows);
  for (const ScheduledRecord& record : schedule.records) {
    excursions.by_record.push_back(peaks_of_record(record, watched, log.sample_rate_hz));
  }
  return excursions;
}

}  // namespace hoverwright::excitation
