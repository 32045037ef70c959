// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <cmath>
#include <filesystem>
#include <numbers>

#include "excitation/rehearsal/truth.h"
#include "excitation/schedule/schedule.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::tests {

/// The demo vehicle with its present gains.
inline ident::Vehicle tern() {
  return ident::read_vehicle(std::filesystem::path(HOVERWRIGHT_SOURCE_DIR) / "datasets/tern/vehicle.json");
}

/// Tern's relative with `count` rotors on a circle, the first `first_deg` to the right of the nose, spins
/// alternating. Mass and inertia grow with the rotors, and the rate and climb gains follow the effectiveness,
/// so that all of them fly alike.
inline ident::Vehicle ring_vehicle(int count, double first_deg) {
  const ident::Vehicle model = tern();
  ident::Vehicle vehicle = model;
  ident::Airframe& airframe = *vehicle.airframe;
  airframe.mass_kg *= count / 4.0;
  airframe.inertia_kg_m2 *= count / 4.0;
  airframe.rotors.clear();
  for (int i = 0; i < count; ++i) {
    const double angle = (first_deg + 360.0 * i / count) * std::numbers::pi / 180.0;
    ident::Rotor rotor;
    rotor.position_m = {0.33 * std::cos(angle), 0.33 * std::sin(angle), -0.02};
    rotor.spin = i % 2 == 0 ? -1 : 1;
    rotor.speed_lag_s = 0.045;
    airframe.rotors.push_back(rotor);
  }
  const auto scale = [&](ident::Axis axis, ident::Loop loop) {
    const double ratio = excitation::axis_truth(model, axis).parameters.at("effectiveness") /
                         excitation::axis_truth(vehicle, axis).parameters.at("effectiveness");
    ident::LoopGains& gains = *vehicle.loops[ident::loop_index(loop)];
    gains.kp *= ratio;
    gains.ki *= ratio;
    gains.kd *= ratio;
  };
  scale(ident::Axis::roll, ident::Loop::roll_rate);
  scale(ident::Axis::pitch, ident::Loop::pitch_rate);
  scale(ident::Axis::yaw, ident::Loop::yaw_rate);
  scale(ident::Axis::heave, ident::Loop::climb_rate);
  return vehicle;
}

/// Nothing but hover for `duration_s`.
inline excitation::Schedule quiet_schedule(const ident::Vehicle& vehicle, double duration_s) {
  excitation::Schedule schedule;
  schedule.vehicle_name = vehicle.name;
  schedule.sample_rate_hz = vehicle.control.sample_rate_hz;
  schedule.duration_s = duration_s;
  return schedule;
}

}  // namespace hoverwright::tests
