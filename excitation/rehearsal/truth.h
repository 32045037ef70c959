// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <map>
#include <string>

#include "ident/vehicle/vehicle.h"

namespace hoverwright::excitation {

/// The linear axis parameters implied by the airframe, by analysis (no simulation), by name and in the units
/// of ident/models/structure.h: effectiveness, damping, motor_lag, reaction_lead (yaw), delay (latency plus
/// half a sample). Rotor hubs outside the plane of the centre of gravity add a slow speed mode (sideways air
/// makes a moment) that these structures do not have; unlike rotor lags enter as one, weighted by
/// effectiveness.
struct AxisTruth {
  std::string structure;
  std::map<std::string, double> parameters;
};
/// At hover in still air, or held against a steady horizontal wind: the vehicle leans into it, air comes
/// through the rotors from above and they turn faster, which changes the slopes by a per cent or two (Tern in
/// 5 m/s: effectiveness -1.1 %, reaction lead -1.1 %). A flight is judged by the truth in its own wind.
/// @throws Failure (bad_input) when the vehicle has no airframe or cannot hold against the wind.
AxisTruth axis_truth(const ident::Vehicle& vehicle, ident::Axis axis, double steady_wind_m_s = 0.0);

/// Motor command at hover in still air, 0..1.
double hover_command(const ident::Airframe& airframe);

}  // namespace hoverwright::excitation
