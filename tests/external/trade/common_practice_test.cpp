// SPDX-License-Identifier: GPL-3.0-or-later
// Facts of the trade that any multirotor engineer would check first. They are common practice, not taken from
// a text.
#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>

#include "excitation/rehearsal/arms.h"
#include "excitation/rehearsal/mixer.h"
#include "excitation/rehearsal/rehearsal.h"
#include "excitation/rehearsal/rigid_body.h"
#include "ident/gravity.h"
#include "tests/excitation/rehearsal/vehicles.h"

using namespace hoverwright;
using excitation::Mixer;
using excitation::RehearsalOptions;
using excitation::RehearsalResult;
using std::numbers::pi;

namespace {

constexpr double kHover = 0.45;

/// Change of the motor commands about hover for a demand on one axis.
Eigen::VectorXd motor_change(const ident::Airframe& airframe, const Eigen::Vector4d& demand) {
  return Mixer(airframe).mix(demand, kHover).command.array() - kHover;
}

double drift_at_end(const RehearsalResult& result) {
  const Eigen::Index last = result.log.time_s.size() - 1;
  return result.log.position_m.row(last).head<2>().norm();
}

}  // namespace

TEST_CASE("common practice: a thrust demand gives equal thrust to all motors") {
  const Eigen::VectorXd change = motor_change(*tests::tern().airframe, {0.0, 0.0, 0.0, 0.1});
  for (Eigen::Index i = 0; i < 4; ++i) CHECK(change(i) == Approx(0.1));
}

TEST_CASE("common practice: left motors speed up to roll right, right motors slow down") {
  const ident::Airframe airframe = *tests::tern().airframe;
  const Eigen::VectorXd change = motor_change(airframe, {0.1, 0.0, 0.0, 0.0});
  for (std::size_t i = 0; i < 4; ++i) {
    const bool left = airframe.rotors[i].position_m.y() < 0.0;
    CHECK((change(static_cast<Eigen::Index>(i)) > 0.0) == left);
  }
}

TEST_CASE("common practice: front motors speed up to raise the nose") {
  const ident::Airframe airframe = *tests::tern().airframe;
  const Eigen::VectorXd change = motor_change(airframe, {0.0, 0.1, 0.0, 0.0});
  for (std::size_t i = 0; i < 4; ++i) {
    CHECK((change(static_cast<Eigen::Index>(i)) > 0.0) == (airframe.rotors[i].position_m.x() > 0.0));
  }
}

TEST_CASE(
    "common practice: a yaw demand raises one diagonal pair and lowers the other; to turn right the "
    "anticlockwise pair rises") {
  const ident::Airframe airframe = *tests::tern().airframe;
  const Eigen::VectorXd change = motor_change(airframe, {0.0, 0.0, 0.1, 0.0});
  for (std::size_t i = 0; i < 4; ++i) {
    const Eigen::Vector3d& place = airframe.rotors[i].position_m;
    const bool front_right_diagonal = place.x() * place.y() > 0.0;
    CHECK((change(static_cast<Eigen::Index>(i)) > 0.0) == front_right_diagonal);
    CHECK((airframe.rotors[i].spin < 0) == front_right_diagonal);
  }
  CHECK(std::abs(change.sum()) < 1e-14);
}

TEST_CASE("common practice: level attitude alone drifts away in gusts, position control comes back") {
  const ident::Vehicle vehicle = tests::tern();
  const excitation::Schedule schedule = tests::quiet_schedule(vehicle, 60.0);
  RehearsalOptions options;
  options.settle_s = 0.0;
  for (const std::uint64_t seed : {1u, 2u, 3u}) {
    options.seed = seed;
    options.position_loops = true;
    const RehearsalResult held = excitation::rehearse(vehicle, schedule, options);
    CHECK(held.excursions.drift_m > 0.1);  // it is pushed away
    CHECK(drift_at_end(held) < 1.0);       // and comes back
    options.position_loops = false;
    const RehearsalResult free = excitation::rehearse(vehicle, schedule, options);
    CHECK(free.excursions.tilt_deg < 10.0);  // it stays level
    CHECK(drift_at_end(free) >
          50.0);  // and goes with the 5 m/s wind, drag over mass of about 0.1 1/s: most of 300 m
    // Downwind: from 250°, so towards 70°, north-east.
    CHECK(free.log.position_m(free.log.position_m.rows() - 1, 0) > 0.0);
    CHECK(free.log.position_m(free.log.position_m.rows() - 1, 1) > 0.0);
  }
}

TEST_CASE("common practice: a steady wind needs a steady lean into it, with no position error") {
  ident::Vehicle vehicle = tests::tern();
  const double wind = 8.0;
  vehicle.airframe->weather.wind_m_s = wind;
  vehicle.airframe->weather.wind_from_deg = 0.0;  // on the nose
  RehearsalOptions options;
  options.turbulence = false;
  options.sensor_noise = false;
  options.settle_s = 120.0;  // the slowest integrator needs 5 s to settle by a factor e
  const RehearsalResult result = excitation::rehearse(vehicle, tests::quiet_schedule(vehicle, 5.0), options);
  const Eigen::Index last = result.log.time_s.size() - 1;
  CHECK(result.log.position_m.row(last).head<2>().norm() < 1e-3);
  CHECK(result.log.velocity_m_s.row(last).norm() < 1e-4);
  // Along the body's x axis: m g sin(lean) = (rotor drag at the speed the rotors turn + body drag) cos(lean).
  const ident::Airframe& a = *vehicle.airframe;
  const double share = std::sqrt(result.log.motor_command.row(last).mean() / excitation::hover_command(a));
  const double drag = 4.0 * a.in_plane_drag_n_s_m * share * wind +
                      0.5 * excitation::kAirDensity * a.body_drag_area_m2 * wind * wind;
  // The mean of the commands stands for the mean of their roots: they differ by less than 2 %, so to 1e-4.
  CHECK(-std::tan(result.log.attitude_rad(last, 1)) ==
        Approx(drag / (a.mass_kg * ident::kStandardGravity)).epsilon(1e-3));
  CHECK(std::abs(result.log.attitude_rad(last, 0)) < 1e-4);
}

TEST_CASE("common practice: tilted at hover thrust, a vehicle loses lift as the cosine of the tilt") {
  const ident::Airframe airframe = *tests::tern().airframe;
  for (const double tilt_deg : {10.0, 20.0, 30.0}) {
    const double tilt = tilt_deg * pi / 180.0;
    excitation::RigidBody body(airframe);
    body.state().attitude = Eigen::AngleAxisd(tilt, Eigen::Vector3d::UnitX());
    const Eigen::VectorXd command = Eigen::VectorXd::Constant(4, excitation::hover_command(airframe));
    const double interval_s = 0.0025;
    body.step(command, {}, interval_s);
    // Downward acceleration g (1 - cos tilt); in 2.5 ms the speeds it meets are below 0.02 m/s: 1 % at 10°,
    // less beyond.
    CHECK(body.state().velocity_m_s.z() / interval_s ==
          Approx(ident::kStandardGravity * (1.0 - std::cos(tilt))).epsilon(0.01));
  }
}

TEST_CASE("common practice: leaning into wind without altitude control sinks, with it the height stays") {
  ident::Vehicle vehicle = tests::tern();
  vehicle.airframe->weather.wind_m_s = 12.0;
  RehearsalOptions options;
  options.turbulence = false;
  options.sensor_noise = false;
  options.settle_s = 30.0;
  const excitation::Schedule schedule = tests::quiet_schedule(vehicle, 10.0);
  const RehearsalResult held = excitation::rehearse(vehicle, schedule, options);
  CHECK(held.excursions.climb_m < 0.05);
  // More thrust than in a level hover: 1/cos of the lean.
  const Eigen::Index last = held.log.time_s.size() - 1;
  CHECK(held.log.motor_command.row(last).mean() > excitation::hover_command(*vehicle.airframe));
  options.altitude_loops = false;
  const RehearsalResult open = excitation::rehearse(vehicle, schedule, options);
  CHECK(open.log.velocity_m_s(open.log.velocity_m_s.rows() - 1, 2) > 0.05);  // sinking, z down
}
