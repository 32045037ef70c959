// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/vehicle/units.h"

#include <catch2/catch.hpp>
#include <numbers>
#include <string>

using namespace hoverwright::ident;

TEST_CASE("units: factors to SI") {
  // One rounding each: two epsilon.
  const auto close = [](double value) { return Approx(value).epsilon(4e-16).margin(0.0); };
  CHECK(unit_to_si("rad/s", Quantity::rate) == 1.0);
  CHECK(*unit_to_si("deg/s", Quantity::rate) * 180.0 == close(std::numbers::pi));
  CHECK(*unit_to_si("deg", Quantity::angle) * 180.0 == close(std::numbers::pi));
  CHECK(unit_to_si("g", Quantity::acceleration) == 9.80665);
  CHECK(unit_to_si("m/s^2", Quantity::acceleration) == 1.0);
  CHECK(unit_to_si("m/s", Quantity::velocity) == 1.0);
  CHECK(unit_to_si("m", Quantity::length) == 1.0);
  CHECK(unit_to_si("ms", Quantity::time) == 1e-3);
  CHECK(unit_to_si("us", Quantity::time) == 1e-6);
  CHECK(unit_to_si("1", Quantity::normalised) == 1.0);
}

TEST_CASE("units: an unknown unit and one of another quantity give nothing") {
  CHECK_FALSE(unit_to_si("rpm", Quantity::rate));
  CHECK_FALSE(unit_to_si("", Quantity::rate));
  CHECK_FALSE(unit_to_si("deg", Quantity::rate));
  CHECK_FALSE(unit_to_si("s", Quantity::normalised));
}

TEST_CASE("units: every name told in messages is accepted") {
  for (const Quantity quantity : {Quantity::rate, Quantity::angle, Quantity::acceleration, Quantity::velocity,
                                  Quantity::length, Quantity::time, Quantity::normalised}) {
    std::string names(unit_names(quantity));
    while (!names.empty()) {
      const std::size_t comma = names.find(", ");
      INFO(names);
      CHECK(unit_to_si(names.substr(0, comma), quantity).has_value());
      names = comma == std::string::npos ? std::string() : names.substr(comma + 2);
    }
  }
}
