// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/vehicle/vehicle.h"

#include <catch2/catch.hpp>
#include <string>

#include "ident/failure.h"

using namespace hoverwright::ident;

namespace {

// The least a vehicle file can say.
const std::string kSmallest = R"({
  "format": "hoverwright.vehicle/1", "name": "Least", "time": { "name": "t", "unit": "us" },
  "control": { "sample_rate_hz": 250, "latency_s": 0 },
  "axes": { "heave": {
    "channels": { "demand": { "name": "u", "unit": "1" }, "output": { "name": "vz", "unit": "m/s", "scale": -0.01 } },
    "structure": "climb_rate" } }
})";

}  // namespace

TEST_CASE("vehicle: the demo vehicle is read value by value") {
  const Vehicle tern = read_vehicle(HOVERWRIGHT_SOURCE_DIR "/datasets/tern/vehicle.json");
  CHECK(tern.name == "Tern");
  CHECK(tern.time.name == "time_s");
  CHECK(tern.control.sample_rate_hz == 400.0);
  CHECK(tern.control.latency_s == 0.006);
  CHECK(tern.control.gyro_filter_hz == 80.0);
  CHECK(tern.limits.endurance_s == 720.0);
  CHECK(tern.speed_damping_1_s == 0.1);
  for (const Axis axis : kAxes) REQUIRE(tern.axes[axis_index(axis)].has_value());
  const AxisSetup& yaw = *tern.axes[axis_index(Axis::yaw)];
  CHECK(yaw.structure == "yaw_reaction");
  CHECK(yaw.channels.excitation->name == "excite_yaw");
  CHECK(yaw.prior.at("reaction_lead") == 0.1);
  const AxisSetup& heave = *tern.axes[axis_index(Axis::heave)];
  CHECK(heave.channels.output.scale == -1.0);
  CHECK(heave.channels.output.unit == "m/s^2");
  for (const Loop loop : kLoops) CHECK(tern.loops[loop_index(loop)].has_value());
  const LoopGains& velocity = *tern.loops[loop_index(Loop::velocity_y)];
  CHECK(velocity.kp == 1.2);
  CHECK(velocity.ki == 0.25);
  CHECK(velocity.kd == 0.0);
  CHECK(velocity.limit == 3.5);
  REQUIRE(tern.airframe.has_value());
  CHECK(tern.airframe->mass_kg == 3.1);
  CHECK(tern.airframe->inertia_kg_m2 == Eigen::Vector3d(0.062, 0.078, 0.115));
  REQUIRE(tern.airframe->rotors.size() == 4);
  CHECK(tern.airframe->rotors[0].spin == -1);
  CHECK(tern.airframe->rotors[1].spin == 1);
  CHECK(tern.airframe->rotors[1].position_m == Eigen::Vector3d(-0.21, 0.25, 0.0));
  CHECK(tern.airframe->noise.accelerometer_m_s2 == 0.15);
  CHECK(tern.airframe->weather.wind_from_deg == 250.0);
}

TEST_CASE("vehicle: what is optional may be left out and has its default") {
  const Vehicle least = parse_vehicle(kSmallest, "least.json");
  CHECK_FALSE(least.axes[axis_index(Axis::roll)].has_value());
  const AxisSetup& heave = *least.axes[axis_index(Axis::heave)];
  CHECK_FALSE(heave.channels.excitation.has_value());
  CHECK(heave.channels.demand.scale == 1.0);
  CHECK(heave.channels.output.scale == -0.01);
  CHECK(heave.prior.empty());
  CHECK(least.limits.tilt_deg == Limits{}.tilt_deg);
  CHECK(least.limits.endurance_s == Limits{}.endurance_s);
  CHECK_FALSE(least.control.gyro_filter_hz.has_value());
  CHECK_FALSE(least.speed_damping_1_s.has_value());
  CHECK_FALSE(least.airframe.has_value());
  for (const auto& loop : least.loops) CHECK_FALSE(loop.has_value());
}

TEST_CASE("vehicle: the commented start is accepted as it is, whatever the name") {
  for (const std::string name :
       {"My vehicle", "with \"quotes\" and \\", "Möwe", "two\nlines // no comment"}) {
    const std::string text = vehicle_template(name);
    const Vehicle vehicle = parse_vehicle(text, "new.json");
    CHECK(vehicle.name == name);
    for (const Axis axis : kAxes) {
      REQUIRE(vehicle.axes[axis_index(axis)].has_value());
      CHECK(vehicle.axes[axis_index(axis)]->channels.excitation.has_value());
    }
    for (const auto& loop : vehicle.loops) CHECK(loop.has_value());
    REQUIRE(vehicle.airframe.has_value());
    CHECK(vehicle.airframe->rotors.size() == 4);
  }
}

TEST_CASE("vehicle: the commented start says what a newcomer must know") {
  const std::string text = vehicle_template("x");
  for (const char* words :
       {"x forward, y right, z down", "Only for rehearsing", "seen from", "feedback", "scale", "rate_damped",
        "rate_motor_lag", "yaw_reaction", "heave_accel", "climb_rate"}) {
    INFO(words);
    CHECK(text.find(words) != std::string::npos);
  }
}

TEST_CASE("vehicle: a name that is no text is refused for a new file") {
  CHECK_THROWS_AS(vehicle_template("\xff\xfe"), Failure);
  CHECK_THROWS_AS(vehicle_template(""), Failure);
}
