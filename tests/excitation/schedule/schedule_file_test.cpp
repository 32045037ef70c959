// SPDX-License-Identifier: GPL-3.0-or-later
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdlib>
#include <nlohmann/json.hpp>
#include <sstream>
#include <string>

#include "excitation/schedule/schedule.h"
#include "ident/failure.h"
#include "ident/files.h"
#include "tests/excitation/schedule/plain_vehicle.h"
#include "tests/run_script.h"

namespace hoverwright::excitation {
namespace {

using Catch::Contains;
using Json = nlohmann::ordered_json;

/// Numbers with no short decimal form, so that a lost bit shows.
ScheduleOptions awkward_options() {
  ScheduleOptions options;
  options.low_hz = 1.0 / 3.0;
  options.high_hz = 20.0 / 1.1;
  options.record_s = 100.0 / 3.0;
  options.trim_s = std::sqrt(7.0);
  options.demand_share = 1.0 / 7.0;
  options.amplitude[ident::Axis::yaw] = 0.1 / 3.0;
  return options;
}

Schedule awkward_schedule() {
  ident::Vehicle vehicle = tests::plain_vehicle();
  vehicle.name = "Plover \"7\" <é>";
  vehicle.control.sample_rate_hz = 333.0;
  return plan_schedule(vehicle, awkward_options());
}

std::string awkward_text() {
  return schedule_to_json(awkward_schedule(), awkward_options(), std::string(64, 'a'));
}

std::string complaint(const Json& json) {
  try {
    parse_schedule(json.dump(), "s.json");
  } catch (const ident::Failure& failure) {
    CHECK(failure.kind() == ident::FailureKind::bad_input);
    return failure.what();
  }
  return "accepted";
}

}  // namespace

TEST_CASE("schedule file: what is written comes back bit for bit") {
  const Schedule written = awkward_schedule();
  const tests::TemporaryFolder folder;
  const auto path = folder.path() / "schedule.json";
  ident::write_file(path, awkward_text());
  const Schedule read = read_schedule(path);
  CHECK(read.vehicle_name == written.vehicle_name);
  CHECK(read.sample_rate_hz == written.sample_rate_hz);
  CHECK(read.duration_s == written.duration_s);
  CHECK(read.reserve_s == written.reserve_s);
  CHECK(read.endurance_s == written.endurance_s);
  CHECK(read.trim_s == written.trim_s);
  CHECK(read.cautions == written.cautions);
  REQUIRE(read.records.size() == written.records.size());
  for (std::size_t k = 0; k < read.records.size(); ++k) {
    CHECK(read.records[k].name == written.records[k].name);
    CHECK(read.records[k].axis == written.records[k].axis);
    CHECK(read.records[k].validation == written.records[k].validation);
    CHECK(read.records[k].start_s == written.records[k].start_s);
    CHECK(read.records[k].signal.index() == written.records[k].signal.index());
  }
  for (double t_s = 0.0; t_s < written.duration_s; t_s += 0.0137)
    REQUIRE(read.value(t_s) == written.value(t_s));
  CHECK(schedule_to_json(read, awkward_options(), std::string(64, 'a')) == awkward_text());
}

TEST_CASE("schedule file: says what it was made from") {
  const Json json = Json::parse(awkward_text());
  CHECK(json["format"] == "hoverwright.schedule/1");
  const Json& provenance = json["provenance"];
  CHECK(provenance["program_version"] == HOVERWRIGHT_VERSION);
  CHECK(provenance["command"] == "schedule");
  CHECK(provenance["inputs"]["vehicle.json"] == std::string(64, 'a'));
  CHECK(provenance["options"]["trim_s"] == std::sqrt(7.0));
  CHECK(provenance["options"]["repeats"] == 2);
  CHECK(provenance["options"]["amplitude"]["yaw"] == 0.1 / 3.0);
}

TEST_CASE("schedule file: what does not belong is refused with its place") {
  const Json good = Json::parse(awkward_text());
  const auto with = [&](const std::string& pointer, const Json& value) {
    Json json = good;
    json[Json::json_pointer(pointer)] = value;
    return complaint(json);
  };
  CHECK(complaint(good) == "accepted");
  CHECK_THAT(with("/format", "hoverwright.schedule/2"), Contains("s.json: /format"));
  CHECK_THAT(with("/durations", 1), Contains("/durations") && Contains("duration_s"));
  CHECK_THAT(with("/sample_rate_hz", 0), Contains("/sample_rate_hz"));
  CHECK_THAT(with("/sample_rate_hz", 30), Contains("/records/0/signal") && Contains("half of the loop rate"));
  CHECK_THAT(with("/duration_s", "long"), Contains("/duration_s"));
  CHECK_THAT(with("/duration_s", 10),
             Contains("/records/0/start_s") && Contains("after the schedule's 10 s"));
  CHECK_THAT(with("/records", Json::array()), Contains("/records"));
  CHECK_THAT(with("/records/2/axis", "rol"),
             Contains("/records/2/axis") && Contains("roll, pitch, yaw or heave"));
  CHECK_THAT(with("/records/2/purpose", "fun"), Contains("/records/2/purpose"));
  CHECK_THAT(with("/records/2/colour", "red"), Contains("/records/2/colour"));
  CHECK_THAT(with("/records/2/start_s", 3.0),
             Contains("/records/2/start_s") && Contains("before the record before"));
  CHECK_THAT(with("/records/2/signal/kind", "noise"), Contains("/records/2/signal/kind"));
  CHECK_THAT(with("/records/2/signal/low_hz", 1.0), Contains("/records/2/signal/low_hz"));
  CHECK_THAT(with("/records/0/signal/amplitude", -0.1), Contains("/records/0/signal/amplitude"));
  CHECK_THAT(with("/records/0/signal/hold_cycles", 1.5), Contains("/records/0/signal/hold_cycles"));
  CHECK_THAT(with("/records/0/signal/high_hz", 0.1), Contains("/records/0/signal/high_hz"));
  CHECK_THAT(with("/cautions/0", 5), Contains("/cautions/0"));
  CHECK_THAT(with("/provenance/inputs/vehicle.json", 5), Contains("/provenance/inputs/vehicle.json"));
  CHECK_THAT(with("/provenance/options/low_hz", "low"), Contains("/provenance/options/low_hz"));
  CHECK_THAT(with("/provenance/author", "me"), Contains("/provenance/author"));
  Json missing = good;
  missing["records"][0]["signal"].erase("fade_in_s");
  CHECK_THAT(complaint(missing), Contains("/records/0/signal") && Contains("fade_in_s"));
  CHECK_THROWS_AS(parse_schedule("{", "s.json"), ident::Failure);
  CHECK_THROWS_AS(read_schedule("/nonexistent/schedule.json"), ident::Failure);
}

TEST_CASE("playback: one row per loop sample, the schedule to nine decimals") {
  ident::Vehicle vehicle = tests::plain_vehicle();
  ScheduleOptions options;
  options.record_s = 14.0;
  options.repeats = 1;
  const Schedule schedule = plan_schedule(vehicle, options);
  std::istringstream text(playback_csv(schedule));
  std::string line;
  std::getline(text, line);
  REQUIRE(line == "time_s,roll,pitch,yaw,heave");
  long k = 0;
  for (; std::getline(text, line); ++k) {
    REQUIRE(line.find("-0.000000000") == std::string::npos);
    const double t_s = static_cast<double>(k) / 400.0;
    const Eigen::Vector4d expected = schedule.value(t_s);
    const char* at = line.c_str();
    char* end = nullptr;
    // 0.5e-9 is what nine decimals round away.
    REQUIRE(std::abs(std::strtod(at, &end) - t_s) <= 0.5e-9 + 1e-12);
    for (const double value : expected) {
      REQUIRE(*end == ',');
      at = end + 1;
      REQUIRE(std::abs(std::strtod(at, &end) - value) <= 0.5e-9 + 1e-15);
      REQUIRE(end - at >= 11);
      REQUIRE(end[-10] == '.');
    }
    REQUIRE(*end == '\0');
  }
  CHECK(k == std::lround(schedule.duration_s * 400.0) + 1);
}

}  // namespace hoverwright::excitation
