// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <array>
#include <string_view>

#include "ident/vehicle/units.h"

namespace hoverwright::ident {

/// A model structure as far as the vehicle file needs to know it: what it is called and what its output is.
/// The structures themselves are in ident/models, which this room may not include; a test there keeps the
/// names equal.
struct StructureName {
  std::string_view name;
  Quantity output;
};

inline constexpr std::array kStructureNames{
    StructureName{"rate_damped", Quantity::rate},    StructureName{"rate_motor_lag", Quantity::rate},
    StructureName{"yaw_reaction", Quantity::rate},   StructureName{"heave_accel", Quantity::acceleration},
    StructureName{"climb_rate", Quantity::velocity},
};

/// Parameters a `prior` may name.
inline constexpr std::array<std::string_view, 5> kParameterNames{"effectiveness", "damping", "motor_lag",
                                                                 "reaction_lead", "delay"};

}  // namespace hoverwright::ident
