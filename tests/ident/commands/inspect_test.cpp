// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/inspect.h"

#include <fmt/format.h>

#include <catch2/catch.hpp>
#include <cmath>
#include <nlohmann/json.hpp>
#include <sstream>
#include <string>

#include "ident/failure.h"
#include "ident/files.h"
#include "tests/run_script.h"

using namespace hoverwright::ident;
using hoverwright::tests::TemporaryFolder;

namespace {

constexpr std::string_view kVehicle = R"({
  "format": "hoverwright.vehicle/1", "name": "x", "time": { "name": "time_us", "unit": "us" },
  "control": { "sample_rate_hz": 100, "latency_s": 0.005 },
  "axes": { "roll": { "structure": "rate_damped", "channels": {
    "excitation": { "name": "excite_roll", "unit": "1" }, "demand": { "name": "demand_roll", "unit": "1" },
    "output": { "name": "gyro_x", "unit": "deg/s", "scale": -1 } } } }
})";

/// 20 s at 100 Hz, excitation of 1 Hz from 5 to 15 s.
std::string log_text(const std::string& output_name, double gap_s = 0.0) {
  std::string text = "time_us,excite_roll,demand_roll," + output_name + ",mode\n";
  for (int i = 0; i < 2000; ++i) {
    const double t = 0.01 * i;
    const double r = t >= 5.0 && t < 15.0 ? 0.1 * std::sin(6.2831853 * t + 0.5) : 0.0;
    const double stamp = t + (t > 10.0 ? gap_s : 0.0);
    text += fmt::format("{:.0f},{:.6f},{:.6f},{:.4f},3\n", 1e6 * stamp, r, r + 0.5, 10.0 * std::sin(t));
  }
  return text;
}

struct Files {
  TemporaryFolder folder;
  std::filesystem::path log = folder.path() / "log.csv";
  std::filesystem::path vehicle = folder.path() / "vehicle.json";
  explicit Files(const std::string& text) {
    write_file(log, text);
    write_file(vehicle, kVehicle);
  }
};

std::string inspected(const InspectOptions& options) {
  std::ostringstream out;
  run_inspect(options, out);
  return out.str();
}

bool says(const std::string& text, const std::string& words) {
  INFO(text);
  return text.find(words) != std::string::npos;
}

}  // namespace

TEST_CASE("inspect: a log alone is described, with what its columns could be") {
  const Files files(log_text("gyro_x"));
  const std::string text = inspected({files.log, {}, false});
  CHECK(says(text, "2000 rows, 5 columns"));
  CHECK(says(text, "column \"time_us\": 19.99 s at 100 Hz. Unit us (assumed)"));
  CHECK(says(text, "roll output?"));
  CHECK(says(text, "roll excitation?"));
  CHECK(says(text, "constant"));
  CHECK_FALSE(says(text, "Vehicle file"));
}

TEST_CASE("inspect: the table lines up") {
  const Files files(log_text("gyro_x"));
  std::istringstream lines(inspected({files.log, {}, false}));
  std::string line;
  std::size_t column_end = 0;
  int checked = 0;
  while (std::getline(lines, line)) {
    if (line.starts_with("  column ")) column_end = line.find("mean") + 4;
    for (const char* name : {"excite_roll", "demand_roll", "gyro_x", "mode"}) {
      if (!line.starts_with(std::string("  ") + name)) continue;
      CHECK(line[column_end - 1] != ' ');
      CHECK(line[column_end] == ' ');
      ++checked;
    }
  }
  CHECK(checked == 4);
}

TEST_CASE("inspect: with a vehicle file the mapping and the records are told") {
  const Files files(log_text("gyro_x"));
  const std::string text = inspected({files.log, files.vehicle, false});
  CHECK(says(text, "Unit us, counted from a start of its own"));
  CHECK(says(text, "roll output (-1 x, deg/s)"));
  CHECK(says(text, "all columns it names are there"));
  CHECK(says(text, "1 record found"));
  CHECK(says(text, "sweep"));
  CHECK(says(text, "15.00"));
}

TEST_CASE("inspect: missing columns and gaps are told, not thrown") {
  const Files missing(log_text("gyro_p"));
  const std::string text = inspected({missing.log, missing.vehicle, false});
  CHECK(says(text, "missing: \"gyro_x\" for roll output; the nearest column is \"gyro_p\""));
  CHECK(says(text, "cannot be used as it is: no column \"gyro_x\""));

  const Files gap(log_text("gyro_x", 0.5));
  const std::string with_gap = inspected({gap.log, gap.vehicle, false});
  CHECK(says(with_gap,
             "cannot be used as it is: the samples have 1 gap; the longest is 0.510 s after 10.000 s"));
  CHECK(says(with_gap, "--from 0.000 --to 10.000"));
}

TEST_CASE("inspect: the JSON says the same") {
  const Files files(log_text("gyro_x"));
  const auto document = nlohmann::json::parse(inspected({files.log, files.vehicle, true}));
  CHECK(document["rows"] == 2000);
  CHECK(document["time"]["rate_hz"].get<double>() == Approx(100.0));
  CHECK(document["channels"].size() == 4);
  CHECK(document["mapping"].size() == 4);
  CHECK(document["usable"] == true);
  REQUIRE(document["records"].size() == 1);
  CHECK(document["records"][0]["axis"] == "roll");
  CHECK(document["records"][0]["from_s"].get<double>() == Approx(5.0));
  const auto alone = nlohmann::json::parse(inspected({files.log, {}, true}));
  CHECK(alone["channels"][0]["could_be"] == "roll excitation");
  CHECK_FALSE(alone.contains("mapping"));
}

TEST_CASE("inspect: names that are not UTF-8 do not break the JSON") {
  const Files files(log_text("gyro\xff"));
  CHECK_NOTHROW(nlohmann::json::parse(inspected({files.log, {}, true})));
}

TEST_CASE("inspect: a log without time and a vehicle file with a mistake are failures") {
  const Files files("a,b\n1,2\n0,1\n3,0\n");
  CHECK_THROWS_WITH(inspected({files.log, {}, false}), Catch::Contains("no column rises"));
  write_file(files.vehicle, "{}");
  CHECK_THROWS_WITH(inspected({files.log, files.vehicle, false}), Catch::Contains("vehicle.json: /format"));
}
