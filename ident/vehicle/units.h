// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <optional>
#include <string_view>

namespace hoverwright::ident {

enum class Quantity { rate, angle, acceleration, velocity, length, time, normalised };

/// Factor that takes a value in `unit` to SI (rad/s, rad, m/s², m/s, m, s, 1), or nothing if the unit is
/// unknown or belongs to another quantity. Known: rad/s deg/s | rad deg | m/s^2 g | m/s | m | s ms us | 1
/// (normalised).
std::optional<double> unit_to_si(std::string_view unit, Quantity quantity);

/// The accepted unit names of a quantity, for messages: "rad/s, deg/s".
std::string_view unit_names(Quantity quantity);

}  // namespace hoverwright::ident
