// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/controller.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <string>

#include "ident/failure.h"
#include "tests/excitation/rehearsal/vehicles.h"

using namespace hoverwright;
using excitation::HoverController;
using excitation::Measurement;
using std::numbers::pi;

namespace {

constexpr double kHover = 0.45;

/// Tern without integrators, so that one step shows the signs.
ident::Vehicle proportional_tern() {
  ident::Vehicle vehicle = tests::tern();
  for (auto& gains : vehicle.loops) gains->ki = 0.0;
  return vehicle;
}

/// Demands at the first sample, holding north = east = 0 at 10 m, heading `target_rad`.
Eigen::Vector4d first_demand(const Measurement& m, double target_rad = 0.0) {
  const ident::Vehicle vehicle = proportional_tern();
  HoverController controller(vehicle, kHover, true, true);
  controller.hold(m, {0.0, 0.0, -10.0}, target_rad);
  return controller.step(m);
}

Measurement at_rest(double north, double east, double down, double heading) {
  Measurement m;
  m.position_m = {north, east, down};
  m.attitude_rad.z() = heading;
  return m;
}

}  // namespace

TEST_CASE("controller: nothing to do at the hover point") {
  CHECK(first_demand(at_rest(0.0, 0.0, -10.0, 0.0)).norm() == Approx(0.0).margin(1e-15));
}

TEST_CASE("controller: it leans towards the hover point, in the heading frame") {
  // South of the point: nose down. West of it: roll right.
  Eigen::Vector4d demand = first_demand(at_rest(-1.0, 0.0, -10.0, 0.0));
  CHECK(demand(1) < 0.0);
  CHECK(std::abs(demand(0)) < 1e-15);
  demand = first_demand(at_rest(0.0, -1.0, -10.0, 0.0));
  CHECK(demand(0) > 0.0);
  CHECK(std::abs(demand(1)) < 1e-15);
  // Facing east, north is to the left.
  demand = first_demand(at_rest(-1.0, 0.0, -10.0, pi / 2.0), pi / 2.0);
  CHECK(demand(0) < 0.0);
  CHECK(std::abs(demand(1)) < 1e-15);
}

TEST_CASE("controller: one step is the product of the gains and the lean by atan(acceleration/g)") {
  const ident::Vehicle vehicle = proportional_tern();
  const auto kp = [&](ident::Loop loop) { return vehicle.loops[ident::loop_index(loop)]->kp; };
  const Eigen::Vector4d demand = first_demand(at_rest(-0.5, 0.0, -10.0, 0.0));
  const double acceleration = 0.5 * kp(ident::Loop::position_x) * kp(ident::Loop::velocity_x);
  const double pitch = -std::atan(acceleration / 9.80665);
  CHECK(demand(1) == Approx(pitch * kp(ident::Loop::pitch_angle) * kp(ident::Loop::pitch_rate)));
}

TEST_CASE("controller: the lean set point stays within the tilt limit in any direction") {
  ident::Vehicle vehicle = proportional_tern();
  for (auto& gains : vehicle.loops) gains->limit.reset();
  vehicle.limits.tilt_deg = 20.0;
  const auto kp = [&](ident::Loop loop) { return vehicle.loops[ident::loop_index(loop)]->kp; };
  HoverController controller(vehicle, kHover, true, true);
  const Measurement far = at_rest(-300.0, -300.0, -10.0, 0.0);
  controller.hold(far, {0.0, 0.0, -10.0}, 0.0);
  const Eigen::Vector4d demand = controller.step(far);
  const double roll = demand(0) / (kp(ident::Loop::roll_angle) * kp(ident::Loop::roll_rate));
  const double pitch = demand(1) / (kp(ident::Loop::pitch_angle) * kp(ident::Loop::pitch_rate));
  CHECK(std::hypot(std::tan(roll), std::tan(pitch)) == Approx(std::tan(20.0 * pi / 180.0)));
}

TEST_CASE("controller: rates, angles and climb are opposed") {
  Measurement m = at_rest(0.0, 0.0, -10.0, 0.0);
  m.attitude_rad = {0.1, -0.1, 0.0};
  m.rate_rad_s.z() = 0.3;
  // The gyro filter was started from these rates, so the first step sees them in full.
  Eigen::Vector4d demand = first_demand(m);
  CHECK(demand(0) < 0.0);
  CHECK(demand(1) > 0.0);
  CHECK(demand(2) < 0.0);
  m = at_rest(0.0, 0.0, -10.0, 0.0);
  m.velocity_m_s.z() = 0.5;  // sinking
  CHECK(first_demand(m)(3) > 0.0);
  CHECK(first_demand(at_rest(0.0, 0.0, -11.0, 0.0))(3) < 0.0);  // too high
}

TEST_CASE("controller: the heading error goes the short way round") {
  const double degree = pi / 180.0;
  // Target 179°, heading -179°: 2° to the left.
  CHECK(first_demand(at_rest(0.0, 0.0, -10.0, -179.0 * degree), 179.0 * degree)(2) < 0.0);
  CHECK(first_demand(at_rest(0.0, 0.0, -10.0, 179.0 * degree), -179.0 * degree)(2) > 0.0);
}

TEST_CASE("controller: collective is divided by the cosine of the tilt, and the heave demand says so") {
  Measurement m = at_rest(0.0, 0.0, -10.0, 0.0);
  m.attitude_rad = {0.3, 0.4, 0.0};
  CHECK(first_demand(m)(3) == Approx(kHover / (std::cos(0.3) * std::cos(0.4)) - kHover));
}

TEST_CASE("controller: loops left open need no gains, a needed loop is named") {
  ident::Vehicle vehicle = tests::tern();
  for (const ident::Loop loop : {ident::Loop::velocity_x, ident::Loop::velocity_y, ident::Loop::position_x,
                                 ident::Loop::position_y, ident::Loop::climb_rate, ident::Loop::altitude}) {
    vehicle.loops[ident::loop_index(loop)].reset();
  }
  CHECK_NOTHROW(HoverController(vehicle, kHover, false, false));
  try {
    HoverController controller(vehicle, kHover, false, true);
    FAIL("a vehicle without climb_rate was accepted");
  } catch (const ident::Failure& failure) {
    CHECK(failure.kind() == ident::FailureKind::bad_input);
    CHECK(failure.where() == "/loops/climb_rate");
    CHECK(std::string(failure.what()).find("climb_rate") != std::string::npos);
  }
}
