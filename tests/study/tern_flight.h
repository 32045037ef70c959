// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <cstdint>
#include <string>

#include "excitation/rehearsal/rehearsal.h"
#include "ident/commands/gains.h"
#include "ident/commands/identify.h"
#include "ident/flight_log/flight_data.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::tests {

inline ident::Vehicle tern() {
  return ident::read_vehicle(std::string(HOVERWRIGHT_SOURCE_DIR) + "/datasets/tern/vehicle.json");
}

/// The rehearsed log as the identification sees it, without the detour over a file.
inline ident::FlightData flight_data(const excitation::FlightLog& log) {
  ident::FlightData data;
  data.sample_rate_hz = log.sample_rate_hz;
  data.samples = log.time_s.size();
  for (const ident::Axis axis : ident::kAxes) {
    const auto column = static_cast<Eigen::Index>(ident::axis_index(axis));
    ident::AxisSignals signals;
    signals.excitation = log.excitation.col(column);
    signals.demand = log.demand.col(column);
    if (axis == ident::Axis::heave) {
      signals.output = -log.specific_force_m_s2.col(2);
    } else {
      signals.output = log.rate_rad_s.col(column);
    }
    data.axes[ident::axis_index(axis)] = std::move(signals);
  }
  return data;
}

/// Hover of the given length with nothing excited.
inline excitation::Schedule quiet_schedule(const ident::Vehicle& vehicle, double duration_s) {
  excitation::Schedule schedule;
  schedule.vehicle_name = vehicle.name;
  schedule.sample_rate_hz = vehicle.control.sample_rate_hz;
  schedule.duration_s = duration_s;
  schedule.endurance_s = vehicle.limits.endurance_s;
  return schedule;
}

}  // namespace hoverwright::tests
