// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include "ident/strict_json.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::ident {

/// The `airframe` section of the vehicle file. @throws Failure (bad_input) with the JSON pointer: fewer than
/// four rotors, a mass, inertia or thrust that is not positive, moments of inertia that no body can have,
/// thrust below the weight, ...
Airframe read_airframe(StrictObject section);

}  // namespace hoverwright::ident
