// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <string>

#include "ident/vehicle/vehicle.h"

namespace hoverwright::tests {

/// A vehicle of four excited axes, 400 Hz loop, demand limit 0.2, 720 s of battery.
inline ident::Vehicle plain_vehicle() {
  ident::Vehicle vehicle;
  vehicle.name = "Plover";
  vehicle.time = {"time_s", "s"};
  vehicle.control.sample_rate_hz = 400.0;
  vehicle.control.latency_s = 0.006;
  vehicle.limits.endurance_s = 720.0;
  for (const ident::Axis axis : ident::kAxes) {
    const std::string name(ident::axis_name(axis));
    ident::AxisSetup setup;
    setup.channels.excitation = ident::Channel{"excite_" + name, 1.0, "1"};
    setup.channels.demand = {"demand_" + name, 1.0, "1"};
    setup.channels.output = {"output_" + name, 1.0, axis == ident::Axis::heave ? "m/s^2" : "rad/s"};
    setup.structure = "rate_motor_lag";
    vehicle.axes[ident::axis_index(axis)] = setup;
  }
  return vehicle;
}

}  // namespace hoverwright::tests
