// SPDX-License-Identifier: GPL-3.0-or-later
#include <catch2/catch.hpp>
#include <string>
#include <vector>

#include "ident/failure.h"
#include "ident/files.h"
#include "ident/vehicle/vehicle.h"

using namespace hoverwright::ident;

namespace {

/// One mistake made in the demo vehicle's file, and what must be said about it.
struct Mistake {
  std::string original, changed;  // the first occurrence is replaced
  std::string place;              // after "bad.json: "
  std::string problem;            // part of it
  std::string advice;             // part of it; empty: not looked at
};

const std::vector<Mistake> kMistakes{
    // keys
    {"\"sample_rate_hz\"", "\"sample_rat_hz\"", "/control/sample_rate_hz", "\"sample_rate_hz\" is missing",
     "\"sample_rat_hz\" is not a known key here"},
    {"\"gyro_filter_hz\"", "\"gyro_filtre_hz\"", "/control/gyro_filtre_hz", "not known here",
     "nearest known key is \"gyro_filter_hz\""},
    {"\"tilt_deg\"", "\"tilt\"", "/limits/tilt", "not known here", "nearest known key is \"tilt_deg\""},
    {"\"yaw\": {", "\"jaw\": {", "/axes/jaw", "not known here", "nearest known key is \"yaw\""},
    {"\"speed_damping_1_s\"", "\"speed_damping\"", "/speed_damping", "not known here",
     "\"speed_damping_1_s\""},
    {"\"effectiveness\"", "\"effectivness\"", "/axes/roll/prior/effectivness", "not known here",
     "\"effectiveness\""},
    {"\"altitude\": {", "\"height\": {", "/loops/height", "not known here", ""},
    {"\"name\": \"Tern\",", "", "/name", "\"name\" is missing", ""},
    {"\"latency_s\": 0.006,", "\"latency_ms\": 6,", "/control/latency_s", "is missing", "\"latency_ms\""},
    {"\"name\": \"Tern\",", "\"name\": \"Tern\",\n  \"name\": \"Gull\",", "line 6, column 8",
     "\"name\" is there twice", ""},
    {"\"wind_m_s\"", "\"wind\"", "/airframe/weather/wind", "not known here", "\"wind_m_s\""},
    {"\"spin\": \"clockwise\", ", "", "/airframe/rotors/1/spin", "is missing", ""},
    // format
    {"hoverwright.vehicle/1", "hoverwright.vehicle/2", "/format", "\"hoverwright.vehicle/2\" cannot be read",
     "reads \"hoverwright.vehicle/1\""},
    {"\"format\": \"hoverwright.vehicle/1\",", "", "/format", "is missing", ""},
    // types
    {"\"sample_rate_hz\": 400", "\"sample_rate_hz\": \"400\"", "/control/sample_rate_hz",
     "a number is needed, found the text \"400\"", ""},
    {"\"name\": \"Tern\"", "\"name\": 5", "/name", "text in quotes is needed, found the number 5", ""},
    {"\"limits\": { \"tilt_deg\": 30", "\"limits\": [1], \"axes_\": { \"tilt_deg\": 30", "/limits",
     "an object { ... } is needed, found an array", ""},
    {"[0.062, 0.078, 0.115]", "[0.062, 0.078]", "/airframe/inertia_kg_m2",
     "three numbers are needed, found 2", ""},
    {"[0.21, 0.25, 0.0]", "[0.21, \"0.25\", 0.0]", "/airframe/rotors/0/position_m", "three numbers", ""},
    // values
    {"\"sample_rate_hz\": 400", "\"sample_rate_hz\": -400", "/control/sample_rate_hz",
     "greater than zero, is -400", ""},
    {"\"sample_rate_hz\": 400", "\"sample_rate_hz\": 1e300", "/control/sample_rate_hz",
     "beyond any flight computer", ""},
    {"\"sample_rate_hz\": 400", "\"sample_rate_hz\": 1e400", "line 7, column 38", "beyond the range", ""},
    {"\"latency_s\": 0.006", "\"latency_s\": 6", "/control/latency_s", "cannot be flown", "6 ms is 0.006"},
    {"\"gyro_filter_hz\": 80", "\"gyro_filter_hz\": 200", "/control/gyro_filter_hz",
     "not below half the sample rate", ""},
    {"\"tilt_deg\": 30", "\"tilt_deg\": 95", "/limits/tilt_deg", "below 90", ""},
    {"\"demand\": 0.2,", "\"demand\": 20,", "/limits/demand", "must not exceed 1", "normalised"},
    {"\"drift_m\": 5", "\"drift_m\": 0", "/limits/drift_m", "greater than zero", ""},
    {"\"scale\": -1", "\"scale\": 0", "/axes/heave/channels/output/scale", "must not be zero", ""},
    {"\"motor_lag\": 0.05", "\"motor_lag\": -0.05", "/axes/roll/prior/motor_lag", "greater than zero", ""},
    // channels and units
    {"\"name\": \"gyro_x\", \"unit\": \"rad/s\"", "\"name\": \"gyro_x\"", "/axes/roll/channels/output/unit",
     "\"unit\" is missing", ""},
    {"\"name\": \"gyro_x\", \"unit\": \"rad/s\"", "\"name\": \"gyro_x\", \"unit\": \"rpm\"",
     "/axes/roll/channels/output/unit", "\"rpm\" does not fit the rate output", "rad/s, deg/s"},
    {"\"name\": \"gyro_x\", \"unit\": \"rad/s\"", "\"name\": \"gyro_x\", \"unit\": \"deg\"",
     "/axes/roll/channels/output/unit", "\"deg\" does not fit", ""},
    {"\"unit\": \"m/s^2\"", "\"unit\": \"m/s\"", "/axes/heave/channels/output/unit",
     "does not fit the acceleration output of heave_accel", "m/s^2, g"},
    {"\"name\": \"demand_roll\", \"unit\": \"1\"", "\"name\": \"demand_roll\", \"unit\": \"us\"",
     "/axes/roll/channels/demand/unit", "\"us\" does not fit a demand", "\"scale\""},
    {"\"time_s\", \"unit\": \"s\"", "\"time_s\", \"unit\": \"min\"", "/time/unit",
     "\"min\" does not fit the time", "s, ms, us"},
    {"\"demand_pitch\"", "\"demand_roll\"", "/axes/pitch/channels/demand/name",
     "\"demand_roll\" is already used at /axes/roll/channels/demand/name", ""},
    {"\"gyro_z\"", "\"time_s\"", "/axes/yaw/channels/output/name", "\"time_s\" is already used at /time/name",
     ""},
    {"\"demand\": { \"name\": \"demand_roll\", \"unit\": \"1\" },", "", "/axes/roll/channels/demand",
     "is missing", ""},
    {"\"excite_roll\"", "\"\"", "/axes/roll/channels/excitation/name",
     "text in quotes is needed, found empty text", ""},
    // structures
    {"\"rate_motor_lag\"", "\"rate_motorlag\"", "/axes/roll/structure",
     "unknown model structure \"rate_motorlag\"", "nearest one for roll is \"rate_motor_lag\""},
    {"\"rate_motor_lag\"", "\"heave_accel\"", "/axes/roll/structure", "is not one for roll", "rate_damped"},
    {"\"heave_accel\"", "\"rate_damped\"", "/axes/heave/structure", "is not one for heave", "climb_rate"},
    {"\"heave_accel\"", "\"climb_rate\"", "/axes/heave/channels/output/unit",
     "does not fit the velocity output of climb_rate", "m/s"},
    // loops
    {"\"kp\": 0.045", "\"kp\": -0.045", "/loops/roll_rate/kp", "must not be negative", ""},
    {"\"ki\": 0.05, \"kd\": 0,", "\"ki\": 0.05, \"kd\": 0.001,", "/loops/roll_rate/derivative_cutoff_hz",
     "needs the cutoff", "derivative_cutoff_hz"},
    {"\"ki\": 0.05, \"kd\": 0,", "\"ki\": 0.05, \"kd\": 0.001, \"derivative_cutoff_hz\": 300,",
     "/loops/roll_rate/derivative_cutoff_hz", "not below half the sample rate", ""},
    {"\"kp\": 1.2, \"limit\": 0.8", "\"kp\": 0, \"limit\": 0.8", "/loops/heading", "all gains are zero",
     "Leave out"},
    {"\"climb_rate\": { \"kp\": 0.10, \"ki\": 0.05, \"limit\": 0.3 },", "", "/loops/altitude",
     "commands climb_rate, which is not listed", "inside out"},
    // airframe
    {"\"mass_kg\": 3.1", "\"mass_kg\": 0", "/airframe/mass_kg", "greater than zero", ""},
    {"\"mass_kg\": 3.1", "\"mass_kg\": 31", "/airframe/thrust_max_n", "cannot hover", "one rotor"},
    {"[0.062, 0.078, 0.115]", "[0.062, 0.078, 0.315]", "/airframe/inertia_kg_m2", "no body has these",
     "Ixx, Iyy, Izz"},
    {"[0.062, 0.078, 0.115]", "[0.062, -0.078, 0.115]", "/airframe/inertia_kg_m2", "greater than zero", ""},
    {"{ \"position_m\": [-0.21, 0.25, 0.0], \"spin\": \"clockwise\", \"speed_lag_s\": 0.045 },", "",
     "/airframe/rotors", "at least 4 rotors are needed, found 3", ""},
    {"\"spin\": \"anticlockwise\"", "\"spin\": \"ccw\"", "/airframe/rotors/0/spin",
     "unknown spin direction \"ccw\"", "seen from above"},
    {"\"speed_lag_s\": 0.045", "\"speed_lag_s\": 0", "/airframe/rotors/0/speed_lag_s", "greater than zero",
     ""},
    {"\"command_min\": 0.03", "\"command_min\": 1", "/airframe/command_min", "below 1", ""},
    {"\"gyro_rad_s\": 0.01", "\"gyro_rad_s\": -0.01", "/airframe/noise/gyro_rad_s", "must not be negative",
     ""},
};

Failure failure_of(const std::string& text) {
  try {
    parse_vehicle(text, "bad.json");
  } catch (const Failure& failure) {
    return failure;
  }
  throw std::runtime_error("the file was accepted");
}

}  // namespace

TEST_CASE("vehicle: every mistake is told with its place, what is wrong and what to do") {
  const std::string tern = read_file(HOVERWRIGHT_SOURCE_DIR "/datasets/tern/vehicle.json");
  for (const Mistake& mistake : kMistakes) {
    INFO(mistake.original << " -> " << mistake.changed);
    const std::size_t at = tern.find(mistake.original);
    REQUIRE(at != std::string::npos);
    std::string text = tern;
    text.replace(at, mistake.original.size(), mistake.changed);
    const Failure failure = failure_of(text);
    INFO(failure.what());
    CHECK(failure.exit_code() == 2);
    CHECK(failure.where() == "bad.json: " + mistake.place);
    CHECK(failure.problem().find(mistake.problem) != std::string::npos);
    CHECK(failure.advice().find(mistake.advice) != std::string::npos);
  }
}

TEST_CASE("vehicle: files that are no vehicle file at all") {
  struct Case {
    std::string text, problem;
  };
  const std::vector<Case> cases{
      {"", "empty"},
      {"// only a comment\n", "not valid JSON"},
      {"[]", "an object { ... } is needed"},
      {"null", "an object { ... } is needed"},
      {"{}", "\"format\" is missing"},
      {std::string("\0\1\2\3", 4), "not valid JSON"},
      {std::string(200'000, '{'), "not valid JSON"},
      {std::string(200'000, '['), "nested deeper"},
      {"time,gyro_x\n0,1\n", "not valid JSON"},
      {R"({"format": "hoverwright.vehicle/1", "name": "x", "time": {"name": "t", "unit": "s"},
           "control": {"sample_rate_hz": 100, "latency_s": 0}, "axes": {}})",
       "no axis is described"},
  };
  for (const Case& c : cases) {
    INFO(c.text.substr(0, 50));
    const Failure failure = failure_of(c.text);
    INFO(failure.what());
    CHECK(failure.exit_code() == 2);
    CHECK(failure.problem().find(c.problem) != std::string::npos);
  }
}

TEST_CASE("vehicle: a flat body is a body") {
  const std::string tern = read_file(HOVERWRIGHT_SOURCE_DIR "/datasets/tern/vehicle.json");
  std::string text = tern;
  const std::string inertia = "[0.062, 0.078, 0.115]";
  text.replace(text.find(inertia), inertia.size(), "[0.1, 0.2, 0.3]");  // 0.1 + 0.2 is not 0.3 in binary
  CHECK_NOTHROW(parse_vehicle(text, "flat.json"));
}

TEST_CASE("vehicle: no file cut short is accepted, and none does more harm than a message") {
  const std::string tern = read_file(HOVERWRIGHT_SOURCE_DIR "/datasets/tern/vehicle.json");
  const std::size_t end = tern.rfind('}');
  for (std::size_t length = 0; length < end; length += 37) {
    CHECK_THROWS_AS(parse_vehicle(tern.substr(0, length), "cut.json"), Failure);
  }
}
