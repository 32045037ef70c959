// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/mixer.h"

#include <Eigen/Dense>
#include <catch2/catch.hpp>

#include "excitation/rehearsal/arms.h"
#include "ident/failure.h"
#include "tests/excitation/rehearsal/vehicles.h"

using namespace hoverwright;
using excitation::Mixer;

namespace {

constexpr double kHover = 0.45;

/// Moments and lift a command makes, in units of one rotor's thrust.
Eigen::Vector4d effort(const ident::Airframe& airframe, const Eigen::VectorXd& command) {
  return excitation::rotor_arms(airframe) * command;
}

}  // namespace

TEST_CASE("mixer: every demand moves its own axis only, and the most affected motor by one") {
  for (const ident::Vehicle& vehicle :
       {tests::tern(), tests::ring_vehicle(4, 0.0), tests::ring_vehicle(6, 30.0), tests::ring_vehicle(6, 0.0),
        tests::ring_vehicle(8, 22.5)}) {
    const Mixer mixer(*vehicle.airframe);
    const Eigen::Matrix4d product = excitation::rotor_arms(*vehicle.airframe) * mixer.matrix();
    for (Eigen::Index axis = 0; axis < 4; ++axis) {
      CHECK(mixer.matrix().col(axis).cwiseAbs().maxCoeff() == Approx(1.0).epsilon(1e-14));
      CHECK(product(axis, axis) > 0.0);
      for (Eigen::Index other = 0; other < 4; ++other) {
        // Entries are sums of at most eight numbers below one: rounding near 1e-16 each.
        if (other != axis) CHECK(std::abs(product(other, axis)) < 1e-14);
      }
    }
  }
}

TEST_CASE("mixer: a centre of gravity off the middle still gives pure axes") {
  ident::Airframe airframe = *tests::tern().airframe;
  for (ident::Rotor& rotor : airframe.rotors) rotor.position_m += Eigen::Vector3d(0.03, -0.01, 0.0);
  const Eigen::Matrix4d product = excitation::rotor_arms(airframe) * Mixer(airframe).matrix();
  const Eigen::Matrix4d off_axis = product - Eigen::Matrix4d(product.diagonal().asDiagonal());
  CHECK(off_axis.cwiseAbs().maxCoeff() < 1e-14);
}

TEST_CASE("mixer: within the motors' range commands add up exactly") {
  const ident::Airframe airframe = *tests::tern().airframe;
  const Mixer mixer(airframe);
  const Eigen::Vector4d demand(0.05, -0.08, 0.1, 0.04);
  const Mixer::Result result = mixer.mix(demand, kHover);
  CHECK_FALSE(result.saturated);
  const Eigen::VectorXd expected = (mixer.matrix() * demand).array() + kHover;
  CHECK((result.command - expected).cwiseAbs().maxCoeff() < 1e-15);
}

TEST_CASE("mixer: when saturated, yaw gives way first, then collective, then the commands are clipped") {
  const ident::Airframe airframe = *tests::tern().airframe;
  const Mixer mixer(airframe);

  SECTION("yaw alone is shortened; roll, pitch and lift are kept") {
    const Eigen::Vector4d demand(0.2, 0.1, 0.5, 0.05);
    const Mixer::Result result = mixer.mix(demand, kHover);
    REQUIRE(result.saturated);
    const Eigen::Vector4d wanted = effort(airframe, (mixer.matrix() * demand).array() + kHover);
    const Eigen::Vector4d got = effort(airframe, result.command);
    CHECK(got(0) == Approx(wanted(0)));
    CHECK(got(1) == Approx(wanted(1)));
    CHECK(got(3) == Approx(wanted(3)));
    CHECK(got(2) > 0.0);
    CHECK(got(2) < wanted(2));
    // As much yaw as fits: some motor is at an end of its range.
    CHECK((result.command.maxCoeff() == Approx(1.0) ||
           result.command.minCoeff() == Approx(airframe.command_min)));
  }
  SECTION("collective shifts when roll and climb together do not fit; roll is kept") {
    const Eigen::Vector4d demand(0.3, 0.0, 0.0, 0.5);
    const Mixer::Result result = mixer.mix(demand, kHover);
    REQUIRE(result.saturated);
    CHECK(result.command.maxCoeff() == Approx(1.0));
    const Eigen::Vector4d got = effort(airframe, result.command);
    CHECK(got(0) == Approx(effort(airframe, mixer.matrix() * demand)(0)));
    CHECK(got(3) < effort(airframe, (mixer.matrix() * demand).array() + kHover)(3));
  }
  SECTION("a demand no command can meet is clipped about the middle of the range") {
    const Mixer::Result result = mixer.mix(Eigen::Vector4d(0.9, 0.0, 0.0, 0.0), kHover);
    REQUIRE(result.saturated);
    CHECK(result.command.maxCoeff() == Approx(1.0));
    CHECK(result.command.minCoeff() == Approx(airframe.command_min));
    CHECK(effort(airframe, result.command)(0) > 0.0);
    CHECK(std::abs(effort(airframe, result.command)(1)) < 1e-14);
  }
}

TEST_CASE("mixer: rotors that cannot reach all four axes are refused") {
  const ident::Airframe good = *tests::tern().airframe;
  SECTION("three rotors") {
    ident::Airframe airframe = good;
    airframe.rotors.pop_back();
    CHECK_THROWS_AS(Mixer(airframe), ident::Failure);
  }
  SECTION("all turning one way") {
    ident::Airframe airframe = good;
    for (ident::Rotor& rotor : airframe.rotors) rotor.spin = 1;
    CHECK_THROWS_AS(Mixer(airframe), ident::Failure);
  }
  SECTION("all on one line") {
    ident::Airframe airframe = good;
    for (ident::Rotor& rotor : airframe.rotors) rotor.position_m.y() = 0.0;
    CHECK_THROWS_AS(Mixer(airframe), ident::Failure);
  }
  SECTION("spins paired by side") {
    // Left pair one way, right pair the other: yaw cannot be told from roll.
    ident::Airframe airframe = good;
    for (ident::Rotor& rotor : airframe.rotors) rotor.spin = rotor.position_m.y() > 0.0 ? 1 : -1;
    CHECK_THROWS_AS(Mixer(airframe), ident::Failure);
  }
}
