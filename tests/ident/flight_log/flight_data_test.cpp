// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/flight_data.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <numbers>
#include <random>
#include <string>
#include <vector>

#include "ident/failure.h"

using namespace hoverwright::ident;
using Eigen::Index;
using Eigen::VectorXd;

namespace {

constexpr double kNaN = std::numeric_limits<double>::quiet_NaN();

Vehicle roll_vehicle(double rate_hz, const std::string& time_unit = "s") {
  Vehicle vehicle;
  vehicle.name = "test";
  vehicle.time = {"t", time_unit};
  vehicle.control.sample_rate_hz = rate_hz;
  AxisSetup roll;
  roll.channels.excitation = Channel{"r", 1.0, "1"};
  roll.channels.demand = Channel{"u", 0.5, "1"};
  roll.channels.output = Channel{"p", -1.0, "deg/s"};
  roll.structure = "rate_damped";
  vehicle.axes[axis_index(Axis::roll)] = roll;
  return vehicle;
}

/// A log whose three signals are the given time function of the stamps' true times.
LogTable roll_log(const std::vector<double>& stamps, const std::vector<double>& true_time) {
  LogTable log;
  log.source = "flight.csv";
  log.names = {"t", "r", "u", "p"};
  const auto count = static_cast<Index>(stamps.size());
  log.columns.assign(4, VectorXd(count));
  log.missing_cells.assign(4, 0);
  for (Index i = 0; i < count; ++i) {
    const double t = true_time[static_cast<std::size_t>(i)];
    log.columns[0][i] = stamps[static_cast<std::size_t>(i)];
    log.columns[1][i] = std::sin(2.0 * std::numbers::pi * 0.5 * t);
    log.columns[2][i] = 10.0 + t;
    log.columns[3][i] = 90.0 * t;
  }
  return log;
}

LogTable roll_log(const std::vector<double>& stamps) {
  return roll_log(stamps, stamps);
}

std::vector<double> even(Index count, double period, double start = 0.0) {
  std::vector<double> stamps;
  for (Index i = 0; i < count; ++i) stamps.push_back(start + static_cast<double>(i) * period);
  return stamps;
}

Failure failure_of(const LogTable& log, const Vehicle& vehicle, const TimeRange& range = {}) {
  try {
    map_log(log, vehicle, range);
  } catch (const Failure& failure) {
    return failure;
  }
  throw std::runtime_error("the log was accepted");
}

const AxisSignals& roll_of(const FlightData& data) {
  return *data.axes[axis_index(Axis::roll)];
}

/// Largest distance of the demand from the line it lies on, as a time: 0.5 (10 + t), so twice the error in
/// value.
double largest_time_error(const FlightData& data, double first_true_time) {
  double worst = 0.0;
  for (Index k = 0; k < data.samples; ++k) {
    worst =
        std::max(worst, std::abs(2.0 * roll_of(data).demand[k] - 10.0 - first_true_time - data.time_s(k)));
  }
  return worst;
}

bool warned(const FlightData& data, const std::string& words) {
  for (const std::string& warning : data.warnings) {
    if (warning.find(words) != std::string::npos) return true;
  }
  return false;
}

}  // namespace

TEST_CASE("map_log: scale and unit give SI, an even log is taken as it is") {
  const LogTable log = roll_log(even(400, 0.01));
  const FlightData data = map_log(log, roll_vehicle(100.0), {});
  CHECK(data.sample_rate_hz == Approx(100.0).epsilon(1e-12));
  CHECK(data.start_s == Approx(0.0).margin(1e-12));
  REQUIRE(data.samples == 400);
  CHECK(data.warnings.empty());
  CHECK(roll_of(data).excitation == log.columns[1]);  // bit for bit: no interpolation
  CHECK(roll_of(data).demand == 0.5 * log.columns[2]);
  // -90 deg/s per second of time is -pi/2 rad/s per second.
  CHECK(roll_of(data).output[200] == Approx(-std::numbers::pi).epsilon(1e-12));
  CHECK_FALSE(data.axes[axis_index(Axis::yaw)].has_value());
}

TEST_CASE("map_log: epoch time in s, ms and us gives the same flight") {
  const double epoch = 1772429357.826545238;
  for (const auto& [unit, per_second] :
       std::vector<std::pair<std::string, double>>{{"s", 1.0}, {"ms", 1e3}, {"us", 1e6}}) {
    std::vector<double> stamps = even(1000, 0.01, epoch);
    for (double& stamp : stamps) stamp *= per_second;
    const FlightData data = map_log(roll_log(stamps, even(1000, 0.01)), roll_vehicle(100.0, unit), {});
    INFO(unit);
    CHECK(data.samples == 1000);
    CHECK(data.warnings.empty());
    // Stamps resolve 2^-22 s = 2.4e-7 s; the rate is their whole length over the count: 2.4e-7 / 10 s
    // relative.
    CHECK(data.sample_rate_hz == Approx(100.0).epsilon(5e-8));
  }
}

TEST_CASE("map_log: a time range chooses samples, counted from the first stamp") {
  const FlightData data = map_log(roll_log(even(1000, 0.01, 50.0)), roll_vehicle(100.0), {2.0, 4.0});
  CHECK(data.start_s == Approx(2.0).margin(1e-9));
  CHECK(data.samples == 201);
  CHECK(2.0 * roll_of(data).demand[0] == Approx(62.0));
}

TEST_CASE("map_log: without an excitation column the excitation is empty") {
  Vehicle vehicle = roll_vehicle(100.0);
  vehicle.axes[axis_index(Axis::roll)]->channels.excitation.reset();
  const FlightData data = map_log(roll_log(even(400, 0.01)), vehicle, {});
  CHECK(roll_of(data).excitation.size() == 0);
  CHECK(roll_of(data).demand.size() == 400);
}

TEST_CASE("map_log: jitter below a tenth of a period moves nothing, above it is interpolated and told") {
  std::mt19937 random(11);
  for (const double jitter : {0.0004, 0.003}) {  // s either way, period 0.01 s
    std::uniform_real_distribution<double> offset(-jitter, jitter);
    std::vector<double> stamps = even(2000, 0.01);
    for (double& stamp : stamps) stamp += offset(random);
    const FlightData data = map_log(roll_log(stamps), roll_vehicle(100.0), {});
    CHECK(data.samples == 2000);
    CHECK(data.sample_rate_hz == Approx(100.0).epsilon(3e-4));  // two stamps off by 3 ms in 20 s
    CHECK(warned(data, "interpolated") == (jitter > 0.001));
    // The demand is linear in time, so interpolation is exact and what is left is at most a tenth of a
    // period, plus the extrapolation at the ends.
    CHECK(largest_time_error(data, stamps[0]) <= std::max(0.001, jitter) + 1e-9);
  }
}

TEST_CASE("map_log: stamps rounded to a coarse clock are seen as such and not interpolated") {
  // 400 Hz against a clock of 1 ms: steps of 2 and 3 ms.
  const std::vector<double> true_time = even(4000, 0.0025);
  std::vector<double> stamps;
  for (const double t : true_time) stamps.push_back(std::floor(t * 1e3 + 1e-9));
  const LogTable log = roll_log(stamps, true_time);
  const FlightData data = map_log(log, roll_vehicle(400.0, "ms"), {});
  CHECK(data.sample_rate_hz == Approx(400.0).epsilon(1e-4));  // one rounding of 1 ms in 10 s
  CHECK(data.samples == 4000);
  CHECK(warned(data, "rounded to 1 ms"));
  CHECK(roll_of(data).excitation == log.columns[1]);
  // The same without knowing the loop rate: a tenth of it.
  const FlightData unknown = map_log(log, roll_vehicle(40.0, "ms"), {});
  CHECK(unknown.sample_rate_hz == Approx(400.0).epsilon(1e-4));
  CHECK(warned(unknown, "the log runs at 400 Hz, the controller at 40 Hz"));
}

TEST_CASE("map_log: lost samples are filled and counted, the others stay") {
  std::vector<double> stamps = even(1000, 0.01);
  for (const long lost : {900L, 501L, 500L, 20L}) stamps.erase(stamps.begin() + lost);
  const FlightData data = map_log(roll_log(stamps), roll_vehicle(100.0), {});
  CHECK(data.samples == 1000);
  CHECK(data.sample_rate_hz == Approx(100.0).epsilon(1e-9));
  CHECK(warned(data, "4 lost samples"));
  CHECK(largest_time_error(data, 0.0) < 1e-9);
}

TEST_CASE("map_log: repeated stamps are left out and counted") {
  std::vector<double> stamps = even(1000, 0.01);
  std::vector<double> true_time = stamps;
  stamps.insert(stamps.begin() + 300, stamps[299]);
  true_time.insert(true_time.begin() + 300, 77.0);
  const FlightData data = map_log(roll_log(stamps, true_time), roll_vehicle(100.0), {});
  CHECK(data.samples == 1000);
  CHECK(warned(data, "1 sample with the time stamp of the sample before left out"));
  CHECK(largest_time_error(data, 0.0) < 1e-9);
}

TEST_CASE("map_log: single missing cells are filled in time and counted") {
  LogTable log = roll_log(even(1000, 0.01));
  log.columns[2][0] = kNaN;
  log.columns[2][500] = log.columns[2][501] = kNaN;
  log.columns[2][999] = kNaN;
  const FlightData data = map_log(log, roll_vehicle(100.0), {});
  CHECK(warned(data, "column \"u\": 4 missing cells"));
  CHECK(2.0 * roll_of(data).demand[500] == Approx(15.0));
  CHECK(largest_time_error(data, 0.0) == Approx(0.01));  // at the ends only the neighbour is known
}

TEST_CASE("map_log: what cannot be mapped is told with its place and a way out") {
  struct Case {
    std::string name;
    LogTable log;
    TimeRange range;
    std::string problem, advice;
  };
  std::vector<Case> cases;
  const LogTable good = roll_log(even(1000, 0.01));

  LogTable log = good;
  log.names[3] = "gyro_p";
  cases.push_back({"missing output",
                   log,
                   {},
                   "no column \"p\", which the vehicle file names as the output of roll",
                   "nearest"});
  log = good;
  log.names[0] = "time";
  cases.push_back(
      {"missing time", log, {}, "no column \"t\", which the vehicle file names as the time", "nearest"});
  log = good;
  log.columns[0].setConstant(kNaN);
  cases.push_back({"no time at all", log, {}, "holds no number", ""});
  log = good;
  log.columns[0].setConstant(5.0);
  cases.push_back({"time stands still", log, {}, "1 sample with a time of their own", "time's unit"});
  log = good;
  log.columns[0].tail(400).array() -= 2.0;
  cases.push_back({"backwards",
                   log,
                   {},
                   "time goes backwards by 1.99 s at data row 601, 5.990 s after the start",
                   "Split the log"});
  log = good;
  log.columns[0].tail(400).array() += 0.07;
  log.columns[0].tail(100).array() += 1.0;
  cases.push_back({"gaps",
                   log,
                   {},
                   "2 gaps; the longest is 1.010 s after 9.060 s, 101 sample periods",
                   "--from 0.000 --to 5.990"});
  log.columns[2][0] = 3.0;
  cases.push_back(
      {"gap inside the range", log, {6.0, 10.5}, "1 gap; the longest is 1.010 s", "--from 6.070 --to 9.060"});
  cases.push_back({"empty range", good, {5.0, 4.0}, "time range from 5 s to 4 s is empty", ""});
  cases.push_back({"range beyond the log", good, {100.0, {}}, "0 samples", "covers 0 to 9.990 s"});
  cases.push_back({"short range", good, {1.0, 1.1}, "at least 16 are needed", ""});
  log = good;
  for (Index i = 0; i < 1000; i += 50) log.columns[3][i] = kNaN;
  cases.push_back({"2 % missing", log, {}, "column \"p\" (the output of roll) lacks 2.0 %", "full rate"});
  log = good;
  log.columns[1].segment(300, 6).setConstant(kNaN);
  cases.push_back({"6 missing in a row", log, {}, "up to 6 in a row after 3.000 s", "--from and --to"});
  log = good;
  log.columns[3].setConstant(kNaN);
  cases.push_back({"an empty channel", log, {}, "lacks 100.0 %", ""});

  for (const Case& c : cases) {
    INFO(c.name);
    const Failure failure = failure_of(c.log, roll_vehicle(100.0), c.range);
    INFO(failure.what());
    CHECK(failure.exit_code() == 2);
    CHECK(failure.where() == "flight.csv");
    CHECK(failure.problem().find(c.problem) != std::string::npos);
    CHECK(failure.advice().find(c.advice) != std::string::npos);
  }
}

TEST_CASE("map_log: the range a gap message offers works") {
  LogTable log = roll_log(even(1000, 0.01));
  log.columns[0].tail(400).array() += 0.5;
  CHECK_NOTHROW(map_log(log, roll_vehicle(100.0), {0.0, 5.99}));
}

TEST_CASE("map_log: absurd stamps end in a failure") {
  for (const double absurd : {1e308, 1e300, -1e308, 1e17}) {
    LogTable log = roll_log(even(1000, 0.01));
    log.columns[0][999] = absurd;
    CHECK_THROWS_AS(map_log(log, roll_vehicle(100.0), {}), Failure);
    log.columns[0][0] = -1e308;
    CHECK_THROWS_AS(map_log(log, roll_vehicle(100.0), {}), Failure);
  }
}
