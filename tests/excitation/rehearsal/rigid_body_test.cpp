// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/rigid_body.h"

#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>

#include "excitation/rehearsal/arms.h"
#include "ident/failure.h"
#include "ident/gravity.h"
#include "tests/excitation/rehearsal/vehicles.h"

using namespace hoverwright;
using excitation::Air;
using excitation::DelayedVehicle;
using excitation::RigidBody;
using ident::kStandardGravity;

namespace {

Eigen::VectorXd hover_commands(const ident::Airframe& airframe) {
  return Eigen::VectorXd::Constant(static_cast<Eigen::Index>(airframe.rotors.size()),
                                   excitation::hover_command(airframe));
}

/// Rates of change over a step so short that only the first order is left (1e-6 s: second order 1e-6 of it).
constexpr double kInstant = 1e-6;

Eigen::Vector3d turning_acceleration(RigidBody body, const Eigen::VectorXd& command, const Air& air) {
  const Eigen::Vector3d before = body.state().rate_rad_s;
  body.step(command, air, kInstant);
  return (body.state().rate_rad_s - before) / kInstant;
}

/// No air: what is left is a rigid body with rotors in space.
ident::Airframe without_air() {
  ident::Airframe airframe = *tests::tern().airframe;
  airframe.inflow_n_s_m = airframe.in_plane_drag_n_s_m = airframe.body_drag_area_m2 = 0.0;
  return airframe;
}

}  // namespace

TEST_CASE("rigid body: free fall and torque-free tumbling keep energy and angular momentum") {
  const ident::Airframe airframe = without_air();
  RigidBody body(airframe);
  body.state().rotor_speed_rad_s.setZero();
  body.state().rate_rad_s = {2.0, 0.3, 4.0};
  body.state().velocity_m_s = {1.0, -2.0, -3.0};
  const Eigen::Vector3d inertia = airframe.inertia_kg_m2;
  const auto momentum = [&] {
    return Eigen::Vector3d(body.state().attitude * inertia.cwiseProduct(body.state().rate_rad_s));
  };
  const auto energy = [&] {
    return 0.5 * body.state().rate_rad_s.dot(inertia.cwiseProduct(body.state().rate_rad_s));
  };
  const Eigen::Vector3d momentum_before = momentum();
  const double energy_before = energy();
  const Eigen::VectorXd off = Eigen::VectorXd::Zero(4);
  for (int k = 0; k < 2000; ++k) body.step(off, Air{}, 0.0025);  // 5 s

  CHECK((body.state().velocity_m_s - Eigen::Vector3d(1.0, -2.0, -3.0 + 5.0 * kStandardGravity)).norm() <
        1e-10);
  CHECK((body.state().position_m - Eigen::Vector3d(5.0, -10.0, -15.0 + 12.5 * kStandardGravity)).norm() <
        1e-9);
  // RK4 at 2.5 ms and 4.5 rad/s: (0.011)⁵/120 of the turn per step, 2000 steps: 3e-9.
  CHECK((momentum() - momentum_before).norm() < 1e-8 * momentum_before.norm());
  CHECK(std::abs(energy() - energy_before) < 1e-8 * energy_before);
  CHECK(std::abs(body.state().attitude.norm() - 1.0) < 1e-14);
  CHECK(body.specific_force_m_s2(Air{}).norm() == 0.0);
}

TEST_CASE("rigid body: spinning rotors up and down exchanges angular momentum with the body, none is lost") {
  // No external moment: diagonal pairs get equal commands, torque_per_thrust = 0 leaves only the rotors' own
  // inertia. The sum of body and rotor momentum in world axes stays, whatever the tumbling. A wrong sign of
  // reaction or gyroscopic moment breaks this.
  ident::Airframe airframe = without_air();
  airframe.torque_per_thrust_m = 0.0;
  airframe.rotor_inertia_kg_m2 = 6e-4;  // ten times Tern's, to make it matter
  RigidBody body(airframe);
  body.state().rate_rad_s = {0.8, -0.5, 0.3};
  const auto total = [&] {
    double spin = 0.0;
    for (std::size_t i = 0; i < 4; ++i) {
      spin += airframe.rotors[i].spin * airframe.rotor_inertia_kg_m2 *
              body.state().rotor_speed_rad_s(static_cast<Eigen::Index>(i));
    }
    const Eigen::Vector3d own = airframe.inertia_kg_m2.cwiseProduct(body.state().rate_rad_s);
    return Eigen::Vector3d(body.state().attitude * (own + Eigen::Vector3d(0.0, 0.0, spin)));
  };
  const Eigen::Vector3d before = total();
  Eigen::VectorXd command = hover_commands(airframe);
  double most_yaw_rate = 0.0;
  for (int k = 0; k < 800; ++k) {
    for (Eigen::Index i = 0; i < 4; ++i) {
      command(i) =
          airframe.rotors[static_cast<std::size_t>(i)].spin > 0 ? 0.45 + 0.3 * std::sin(0.02 * k) : 0.4;
    }
    body.step(command, Air{}, 0.0025);
    most_yaw_rate = std::max(most_yaw_rate, std::abs(body.state().rate_rad_s.z()));
  }
  CHECK((total() - before).norm() <
        1e-7 * before.norm());  // RK4 against lags of 45 ms: (0.055)⁵/120 = 4e-9 per step of what changes
  CHECK(most_yaw_rate > 0.5);   // there was something to exchange
}

TEST_CASE("rigid body: hover in still air is an equilibrium with four, six and eight rotors") {
  for (const ident::Vehicle& vehicle : {tests::tern(), tests::ring_vehicle(4, 0.0),
                                        tests::ring_vehicle(6, 30.0), tests::ring_vehicle(8, 22.5)}) {
    RigidBody body(*vehicle.airframe);
    const Eigen::VectorXd command = hover_commands(*vehicle.airframe);
    for (int k = 0; k < 4000; ++k) body.step(command, Air{}, 0.0025);
    // Rounding of thrust against weight, 1e-15 g, over 10 s.
    CHECK(body.state().position_m.norm() < 1e-10);
    CHECK(body.state().rate_rad_s.norm() < 1e-12);
    CHECK((body.specific_force_m_s2(Air{}) - Eigen::Vector3d(0.0, 0.0, -kStandardGravity)).norm() < 1e-12);
  }
}

TEST_CASE("rigid body: climbing, rolling, pitching and yawing are damped by the air, by the stated amounts") {
  const ident::Airframe airframe = *tests::tern().airframe;
  RigidBody body(airframe);
  const Eigen::VectorXd command = hover_commands(airframe);

  body.state().velocity_m_s = {0.0, 0.0, -1.0};  // climbing at 1 m/s
  const double drag = 0.5 * 1.225 * airframe.body_drag_area_m2;
  CHECK(body.specific_force_m_s2(Air{}).z() ==
        Approx(-kStandardGravity + (4.0 * airframe.inflow_n_s_m + drag) / airframe.mass_kg).epsilon(1e-12));

  // Still in still air: what remains is the rate. Arms 0.25 and 0.21 m.
  body.state().velocity_m_s.setZero();
  body.state().rate_rad_s = {0.1, 0.0, 0.0};
  CHECK(turning_acceleration(body, command, Air{}).x() ==
        Approx(-0.1 * 4.0 * airframe.inflow_n_s_m * 0.25 * 0.25 / airframe.inertia_kg_m2.x()).epsilon(1e-4));
  body.state().rate_rad_s = {0.0, 0.1, 0.0};
  CHECK(turning_acceleration(body, command, Air{}).y() ==
        Approx(-0.1 * 4.0 * airframe.inflow_n_s_m * 0.21 * 0.21 / airframe.inertia_kg_m2.y()).epsilon(1e-4));
  body.state().rate_rad_s = {0.0, 0.0, 0.1};
  const double radius2 = 0.25 * 0.25 + 0.21 * 0.21;
  CHECK(
      turning_acceleration(body, command, Air{}).z() ==
      Approx(-0.1 * 4.0 * airframe.in_plane_drag_n_s_m * radius2 / airframe.inertia_kg_m2.z()).epsilon(1e-4));
}

TEST_CASE("rigid body: moving and turning air takes the vehicle along") {
  const ident::Airframe airframe = *tests::tern().airframe;
  RigidBody body(airframe);
  const Eigen::VectorXd command = hover_commands(airframe);
  Air air;
  air.velocity_m_s = {0.0, 0.0, -2.0};  // updraft
  CHECK(body.specific_force_m_s2(air).z() <
        -kStandardGravity - 2.0 * 4.0 * airframe.inflow_n_s_m / airframe.mass_kg);
  air.velocity_m_s = {3.0, 0.0, 0.0};  // wind towards north pushes north
  CHECK(body.specific_force_m_s2(air).x() > 0.0);
  // Air that turns acts as the opposite rate of the body does.
  air.velocity_m_s.setZero();
  air.rotation_rad_s = {0.2, -0.1, 0.3};
  const Eigen::Vector3d carried = turning_acceleration(body, command, air);
  body.state().rate_rad_s = -air.rotation_rad_s;
  const Eigen::Vector3d resisted = turning_acceleration(body, command, Air{});
  // Equal up to ω × Iω, 0.06·(0.115 - 0.062)/0.078 = 0.04 rad/s² at most, and gyroscopic moments, nil with
  // balanced rotors.
  CHECK((carried - resisted).norm() < 0.05);
  CHECK(carried.x() > 0.0);
  CHECK(carried.y() < 0.0);
  CHECK(carried.z() > 0.0);
}

TEST_CASE("rigid body: speeding up the anticlockwise rotors turns the nose right, at once by their inertia") {
  const ident::Airframe airframe = *tests::tern().airframe;
  RigidBody body(airframe);
  Eigen::VectorXd command = hover_commands(airframe);
  for (Eigen::Index i = 0; i < 4; ++i) {
    command(i) += airframe.rotors[static_cast<std::size_t>(i)].spin < 0 ? 0.05 : -0.05;
  }
  // At the first instant thrust has not changed: the moment is Σ J dΩ/dt of both pairs.
  const double c0 = excitation::hover_command(airframe);
  const double spin_up = airframe.speed_max_rad_s * (std::sqrt(c0 + 0.05) - std::sqrt(c0 - 0.05)) / 0.045;
  CHECK(turning_acceleration(body, command, Air{}).z() ==
        Approx(2.0 * airframe.rotor_inertia_kg_m2 * spin_up / airframe.inertia_kg_m2.z()).epsilon(1e-4));
}

TEST_CASE("delayed vehicle: commands arrive after the latency, any fraction or multiple of the interval") {
  const ident::Airframe airframe = *tests::tern().airframe;
  const double rate = 400.0, lag = 0.045;
  const Eigen::VectorXd before = hover_commands(airframe);
  const Eigen::VectorXd after = before.array() + 0.1;
  const double from = airframe.speed_max_rad_s * std::sqrt(before(0)),
               to = airframe.speed_max_rad_s * std::sqrt(after(0));
  for (const double latency : {0.0, 0.001, 0.0025, 0.006, 0.0075, 0.0131}) {
    DelayedVehicle vehicle(airframe, rate, latency);
    for (int k = 0; k < 20; ++k) {
      vehicle.advance(k < 4 ? before : after, Air{});  // the new command is computed at 0.010 s
      const double since_arrival = (k + 1) / rate - 4.0 / rate - latency;
      const double speed = since_arrival <= 0.0 ? from : to + (from - to) * std::exp(-since_arrival / lag);
      CHECK(vehicle.body().state().rotor_speed_rad_s(0) ==
            Approx(speed).epsilon(1e-8));  // RK4: 4e-9 of the change per step
    }
  }
}

TEST_CASE(
    "rigid body: attitude angles follow the order heading, pitch, roll; tilt is the angle of the z axis") {
  const double roll = 0.3, pitch = -0.4, heading = 2.5;
  const Eigen::Quaterniond attitude = Eigen::AngleAxisd(heading, Eigen::Vector3d::UnitZ()) *
                                      Eigen::AngleAxisd(pitch, Eigen::Vector3d::UnitY()) *
                                      Eigen::AngleAxisd(roll, Eigen::Vector3d::UnitX());
  CHECK((excitation::euler_angles(attitude) - Eigen::Vector3d(roll, pitch, heading)).norm() < 1e-14);
  CHECK(excitation::tilt_rad(attitude) == Approx(std::acos(std::cos(roll) * std::cos(pitch))).epsilon(1e-13));
}

TEST_CASE("rigid body: impossible airframes are refused") {
  ident::Airframe airframe = *tests::tern().airframe;
  SECTION("no lag") {
    airframe.rotors[2].speed_lag_s = 0.0;
    CHECK_THROWS_AS(RigidBody(airframe), ident::Failure);
  }
  SECTION("too heavy to lift") {
    airframe.mass_kg = 10.0;
    CHECK_THROWS_AS(RigidBody(airframe), ident::Failure);
  }
  SECTION("no inertia") {
    airframe.inertia_kg_m2.y() = 0.0;
    CHECK_THROWS_AS(RigidBody(airframe), ident::Failure);
  }
}
