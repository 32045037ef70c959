// SPDX-License-Identifier: GPL-3.0-or-later
// The program as a user calls it: exit codes, messages, and that a failed command leaves earlier results as
// they were.
#include <fmt/format.h>

#include <catch2/catch.hpp>
#include <filesystem>
#include <string>
#include <vector>

#include "ident/files.h"
#include "tests/run_script.h"

using namespace hoverwright;
using tests::run_script;
using tests::ScriptResult;
using tests::TemporaryFolder;

namespace {

ScriptResult program(const std::string& arguments) {
  return run_script(fmt::format("{} {}", HOVERWRIGHT_PROGRAM, arguments));
}

std::string quoted(const std::filesystem::path& path) {
  return "'" + path.string() + "'";
}

bool holds(const std::string& text, const std::string& part) {
  return text.find(part) != std::string::npos;
}

/// Replaces the one occurrence of `from`, so that a changed template cannot make a case empty.
std::string replaced(std::string text, const std::string& from, const std::string& to) {
  const std::size_t at = text.find(from);
  REQUIRE(at != std::string::npos);
  return text.replace(at, from.size(), to);
}

const std::string kTern =
    ident::read_file(std::string(HOVERWRIGHT_SOURCE_DIR) + "/datasets/tern/vehicle.json");

}  // namespace

TEST_CASE("program: every command has help with an example, and bad usage ends with 2") {
  for (const std::string command :
       {"new", "schedule", "rehearse", "inspect", "identify", "gains", "report", "demo"}) {
    INFO(command);
    const ScriptResult help = program(command + " --help");
    CHECK(help.exit_code == 0);
    CHECK(holds(help.output, "Example:\n  hoverwright " + command));
  }
  CHECK(program("").exit_code == 2);
  CHECK(program("frobnicate").exit_code == 2);
  CHECK(program("schedule").exit_code == 2);
  CHECK(program("schedule x --no-such-option").exit_code == 2);
  CHECK(program("--version").output == "hoverwright " HOVERWRIGHT_VERSION "\n");
}

TEST_CASE("program: new writes a vehicle file that the other commands accept") {
  const TemporaryFolder folder;
  const auto study = folder.path() / "study";
  CHECK(program("new " + quoted(study) + " --name 'Quad 7'").exit_code == 0);
  CHECK(program("schedule " + quoted(study)).exit_code == 0);
  CHECK(std::filesystem::exists(study / "schedule.json"));
  CHECK(std::filesystem::exists(study / "playback" / "schedule.csv"));
  CHECK(std::filesystem::exists(study / "flight_card.html"));
  const ScriptResult again = program("new " + quoted(study));
  CHECK(again.exit_code == 2);
  CHECK(holds(again.output, "vehicle.json"));
}

TEST_CASE("program: a failed command leaves earlier results untouched") {
  const TemporaryFolder folder;
  const auto study = folder.path();
  ident::write_file(study / "vehicle.json", kTern);
  REQUIRE(program("schedule " + quoted(study)).exit_code == 0);
  const std::string schedule = ident::sha256_of_file(study / "schedule.json");
  const std::string card = ident::sha256_of_file(study / "flight_card.html");
  ident::write_file(study / "responses.json", "earlier responses");
  ident::write_file(study / "report.html", "earlier report");

  CHECK(program("schedule " + quoted(study) + " --record 2000").exit_code == 2);
  CHECK(program("schedule " + quoted(study) + " --low -1").exit_code == 2);
  CHECK(program("schedule " + quoted(study) + " --amplitude roll=0.9").exit_code == 2);
  ident::write_file(study / "logs" / "broken.csv", "time_s,a\n1,2\n2,x,3\n");
  CHECK(program("identify " + quoted(study)).exit_code == 2);
  CHECK(program("report " + quoted(study)).exit_code == 2);
  CHECK(program("gains " + quoted(study)).exit_code == 2);

  CHECK(ident::sha256_of_file(study / "schedule.json") == schedule);
  CHECK(ident::sha256_of_file(study / "flight_card.html") == card);
  CHECK(ident::read_file(study / "responses.json") == "earlier responses");
  CHECK(ident::read_file(study / "report.html") == "earlier report");
  for (const auto& entry : std::filesystem::recursive_directory_iterator(study)) {
    CHECK(entry.path().extension() != ".tmp");
  }
}

TEST_CASE("program: malformed vehicle files end with 2 and say where") {
  struct Case {
    std::string from, to, message;
  };
  const std::vector<Case> cases{
      {"hoverwright.vehicle/1", "hoverwright.vehicle/9", "/format"},
      {"\"name\": \"Tern\"", "\"name\": 7", "/name"},
      {"\"sample_rate_hz\": 400", "\"sample_rate_hz\": -400", "/control/sample_rate_hz"},
      {"\"sample_rate_hz\": 400", "\"sample_rate_hz\": \"400\"", "/control/sample_rate_hz"},
      {"\"latency_s\"", "\"latency_ms\"", "latency_s"},
      {"\"tilt_deg\"", "\"tilt_degrees\"", "tilt_deg"},
      {"\"name\": \"gyro_x\", \"unit\": \"rad/s\"", "\"name\": \"gyro_x\"", "/axes/roll/channels/output"},
      {"\"name\": \"gyro_x\", \"unit\": \"rad/s\"", "\"name\": \"gyro_x\", \"unit\": \"furlong\"",
       "rad/s, deg/s"},
      {"\"name\": \"gyro_x\"", "\"name\": \"gyro_y\"", "gyro_y"},
      {"\"rate_motor_lag\"", "\"rate_motor_lagg\"", "rate_motor_lag"},
      {"\"roll_rate\"", "\"rol_rate\"", "roll_rate"},
      {"\"kp\": 0.045", "\"kp\": null", "/loops/roll_rate/kp"},
      {"\"mass_kg\": 3.1", "\"mass_kg\": 0", "/airframe/mass_kg"},
      {"\"spin\": \"anticlockwise\"", "\"spin\": \"left\"", "/airframe/rotors/0/spin"},
      {"\"limits\": {", "\"limits\": [", "vehicle.json"},
  };
  for (const Case& bad : cases) {
    const TemporaryFolder folder;
    ident::write_file(folder.path() / "vehicle.json", replaced(kTern, bad.from, bad.to));
    const ScriptResult result = program("schedule " + quoted(folder.path()));
    INFO(bad.to << "\n" << result.output);
    CHECK(result.exit_code == 2);
    CHECK(holds(result.output, bad.message));
    CHECK_FALSE(std::filesystem::exists(folder.path() / "schedule.json"));
  }
}

TEST_CASE("program: malformed logs end with 2 and say where") {
  struct Case {
    std::string content, message;
  };
  const std::string header =
      "time_s,excite_roll,demand_roll,gyro_x,excite_pitch,demand_pitch,gyro_y,excite_yaw,demand_yaw,gyro_z,"
      "excite_heave,demand_heave,accel_z\n";
  const std::string row = ",0,0,0,0,0,0,0,0,0,0,0,0\n";
  std::string gap = header;
  std::string backwards = header;
  std::string steady = header;
  for (int i = 0; i < 400; ++i) {
    gap += fmt::format("{:.4f}", 0.0025 * i + (i > 200 ? 4.0 : 0.0)) + row;
    steady += fmt::format("{:.4f}", 0.0025 * i) + row;
    backwards += fmt::format("{:.4f}", 0.0025 * i - (i > 200 ? 0.1 : 0.0)) + row;
  }
  const std::vector<Case> cases{
      {"", "bad.csv"},
      {"\n\n", "bad.csv"},
      {header, "bad.csv"},
      {header + "0" + row + "0.0025,1,2\n", "3"},
      {"time_s;excite_roll;demand_roll\n0,1;0,2;0,3\n", "decimal"},
      {"time_s,a,a\n0,1,2\n", "a"},
      {replaced(steady, "gyro_x", "gyro_X"), "\"gyro_x\""},
      {gap, "gap"},
      {backwards, "back"},
      {header + "0" + row + "0.0025" + row, "16"},
      {std::string("\x00\x01\x02\xff\xfe garbage", 14), "bad.csv"},
  };
  for (const Case& bad : cases) {
    const TemporaryFolder folder;
    ident::write_file(folder.path() / "vehicle.json", kTern);
    ident::write_file(folder.path() / "logs" / "bad.csv", bad.content);
    const ScriptResult result = program("identify " + quoted(folder.path()));
    INFO(bad.content.substr(0, 200) << "\n" << result.output);
    CHECK(result.exit_code == 2);
    CHECK(holds(result.output, bad.message));
    CHECK_FALSE(std::filesystem::exists(folder.path() / "responses.json"));
  }
}

TEST_CASE("program: missing files and ambiguous logs are named") {
  const TemporaryFolder folder;
  const std::string study = quoted(folder.path());
  for (const std::string command : {"schedule ", "rehearse ", "identify ", "gains ", "report "}) {
    INFO(command);
    CHECK(program(command + study).exit_code == 2);
  }
  ident::write_file(folder.path() / "vehicle.json", kTern);
  CHECK(holds(program("identify " + study).output, "there is no log"));
  CHECK(holds(program("rehearse " + study).output, "`hoverwright schedule "));
  CHECK(holds(program("gains " + study).output, "`hoverwright identify "));
  CHECK(holds(program("report " + study).output, "`hoverwright identify "));
  ident::write_file(folder.path() / "logs" / "a.csv", "t\n");
  ident::write_file(folder.path() / "logs" / "b.csv", "t\n");
  CHECK(holds(program("identify " + study).output, "there are 2 logs: a.csv, b.csv"));
  CHECK(program("inspect " + quoted(folder.path() / "none.csv")).exit_code == 2);
}
