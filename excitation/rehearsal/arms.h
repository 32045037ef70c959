// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>

#include "ident/vehicle/vehicle.h"

namespace hoverwright::excitation {

inline constexpr double kAirDensity = 1.225;  ///< kg/m³, standard atmosphere at sea level

/// What one newton of each rotor's thrust does about the axes, 4 × rotors: roll moment -y, pitch moment x,
/// yaw moment -spin times torque over thrust (N m per N), upward force 1.
Eigen::Matrix4Xd rotor_arms(const ident::Airframe& airframe);

/// Distance across the rotor hubs, twice the largest distance of a hub from the z axis.
double rotor_span_m(const ident::Airframe& airframe);

}  // namespace hoverwright::excitation
