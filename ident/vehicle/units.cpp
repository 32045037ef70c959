// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/vehicle/units.h"

#include <array>
#include <numbers>

#include "ident/gravity.h"

namespace hoverwright::ident {
namespace {

struct Unit {
  std::string_view name;
  Quantity quantity;
  double to_si;
};

constexpr double kDegree = std::numbers::pi / 180.0;

constexpr std::array kUnits{
    Unit{"rad/s", Quantity::rate, 1.0},
    Unit{"deg/s", Quantity::rate, kDegree},
    Unit{"rad", Quantity::angle, 1.0},
    Unit{"deg", Quantity::angle, kDegree},
    Unit{"m/s^2", Quantity::acceleration, 1.0},
    Unit{"g", Quantity::acceleration, kStandardGravity},
    Unit{"m/s", Quantity::velocity, 1.0},
    Unit{"m", Quantity::length, 1.0},
    Unit{"s", Quantity::time, 1.0},
    Unit{"ms", Quantity::time, 1e-3},
    Unit{"us", Quantity::time, 1e-6},
    Unit{"1", Quantity::normalised, 1.0},
};

}  // namespace

std::optional<double> unit_to_si(std::string_view unit, Quantity quantity) {
  for (const Unit& known : kUnits) {
    if (known.name == unit && known.quantity == quantity) return known.to_si;
  }
  return std::nullopt;
}

std::string_view unit_names(Quantity quantity) {
  switch (quantity) {
    case Quantity::rate:
      return "rad/s, deg/s";
    case Quantity::angle:
      return "rad, deg";
    case Quantity::acceleration:
      return "m/s^2, g";
    case Quantity::velocity:
      return "m/s";
    case Quantity::length:
      return "m";
    case Quantity::time:
      return "s, ms, us";
    case Quantity::normalised:
      break;
  }
  return "1";
}

}  // namespace hoverwright::ident
