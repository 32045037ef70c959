// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/schedule/schedule.h"

#include <fmt/format.h>

#include <cmath>
#include <iterator>

namespace hoverwright::excitation {

double ScheduledRecord::duration_s() const {
  return std::visit([](const auto& any) { return any.duration_s; }, signal);
}

double ScheduledRecord::amplitude() const {
  return std::visit([](const auto& any) { return any.amplitude; }, signal);
}

double ScheduledRecord::value(double t_from_schedule_start_s) const {
  return std::visit([&](const auto& any) { return any.value(t_from_schedule_start_s - start_s); }, signal);
}

Eigen::Vector4d Schedule::value(double t_s) const {
  Eigen::Vector4d excitation = Eigen::Vector4d::Zero();
  for (const ScheduledRecord& record : records) {
    excitation[static_cast<Eigen::Index>(ident::axis_index(record.axis))] += record.value(t_s);
  }
  return excitation;
}

std::string playback_csv(const Schedule& schedule) {
  const auto samples = std::lround(schedule.duration_s * schedule.sample_rate_hz);
  fmt::memory_buffer text;
  auto out = std::back_inserter(text);
  fmt::format_to(out, "time_s,roll,pitch,yaw,heave\n");
  for (long k = 0; k <= samples; ++k) {
    const double t_s = static_cast<double>(k) / schedule.sample_rate_hz;
    fmt::format_to(out, "{:.9f}", t_s);
    for (const double value : schedule.value(t_s)) {
      // What would print as "-0.000000000" is zero at this resolution.
      fmt::format_to(out, ",{:.9f}", std::abs(value) < 0.5e-9 ? 0.0 : value);
    }
    text.push_back('\n');
  }
  return fmt::to_string(text);
}

}  // namespace hoverwright::excitation
