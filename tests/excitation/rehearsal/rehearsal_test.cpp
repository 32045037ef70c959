// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/rehearsal.h"

#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>
#include <sstream>
#include <string>

#include "ident/failure.h"
#include "tests/excitation/rehearsal/vehicles.h"

using namespace hoverwright;
using excitation::RehearsalOptions;
using excitation::RehearsalResult;
using excitation::Schedule;

namespace {

/// One doublet of `amplitude` on an axis, 3 s in, 10 s in all.
Schedule one_doublet(const ident::Vehicle& vehicle, ident::Axis axis, double amplitude) {
  Schedule schedule = tests::quiet_schedule(vehicle, 10.0);
  excitation::ScheduledRecord record;
  record.name = std::string(ident::axis_name(axis)) + " doublet";
  record.axis = axis;
  record.start_s = 3.0;
  record.signal = excitation::Doublet{amplitude, 1.2};
  schedule.records.push_back(record);
  return schedule;
}

std::string first_line(const std::string& text) {
  return text.substr(0, text.find('\n'));
}

}  // namespace

TEST_CASE("rehearsal: Tern flies its default schedule within its limits") {
  const ident::Vehicle vehicle = tests::tern();
  const Schedule schedule = excitation::plan_schedule(vehicle, {});
  const RehearsalResult result = excitation::rehearse(vehicle, schedule, {});
  for (const std::string& sentence : result.excursions.exceeded) UNSCOPED_INFO(sentence);
  CHECK(result.excursions.exceeded.empty());
  CHECK_FALSE(result.excursions.diverged);
  CHECK(result.excursions.saturated_share < 0.001);
  CHECK(result.excursions.by_record.size() == schedule.records.size());
  REQUIRE(result.log.time_s.size() == std::llround(schedule.duration_s * 400.0));

  // The log holds the schedule as it was planned.
  for (Eigen::Index k = 0; k < result.log.time_s.size(); k += 997) {
    CHECK(result.log.time_s(k) == Approx(static_cast<double>(k) / 400.0));
    CHECK((result.log.excitation.row(k).transpose() - schedule.value(result.log.time_s(k))).norm() == 0.0);
  }
  // Excursions of records are part of the flight's.
  double tilt = 0.0;
  for (const auto& record : result.excursions.by_record) tilt = std::max(tilt, record.peaks.tilt_deg);
  CHECK(tilt > 5.0);
  CHECK(tilt <= result.excursions.tilt_deg);
}

TEST_CASE("rehearsal: the same seed gives the same bytes, another seed another flight") {
  const ident::Vehicle vehicle = tests::tern();
  const Schedule schedule = one_doublet(vehicle, ident::Axis::roll, 0.04);
  RehearsalOptions options;
  const std::string first = excitation::log_to_csv(excitation::rehearse(vehicle, schedule, options).log);
  CHECK(first == excitation::log_to_csv(excitation::rehearse(vehicle, schedule, options).log));
  options.seed = 2;
  CHECK(first != excitation::log_to_csv(excitation::rehearse(vehicle, schedule, options).log));
}

TEST_CASE("rehearsal: sensor noise has the stated size and its own random numbers") {
  ident::Vehicle vehicle = tests::tern();
  vehicle.airframe->weather.turbulence_wind_m_s = 0.0;
  const Schedule schedule = tests::quiet_schedule(vehicle, 20.0);
  RehearsalOptions options;
  options.settle_s = 30.0;
  const RehearsalResult noisy = excitation::rehearse(vehicle, schedule, options);
  options.sensor_noise = false;
  const RehearsalResult quiet = excitation::rehearse(vehicle, schedule, options);
  const auto spread = [](const Eigen::VectorXd& x) {
    return std::sqrt((x.array() - x.mean()).square().mean());
  };
  // 8000 samples: relative standard error of a deviation 0.8 %, four of them; the vehicle's answer to the
  // noise is far smaller in the gyro and accelerometer signals (rms rate below 1 mrad/s against 10).
  CHECK(spread(noisy.log.rate_rad_s.col(0)) == Approx(0.01).epsilon(0.04));
  CHECK(spread(noisy.log.specific_force_m_s2.col(0)) == Approx(0.15).epsilon(0.04));
  CHECK(spread(quiet.log.rate_rad_s.col(0)) < 1e-4);
}

TEST_CASE("rehearsal: in gusts, vehicles with four, six and eight rotors hold their place") {
  for (const ident::Vehicle& vehicle : {tests::tern(), tests::ring_vehicle(4, 0.0),
                                        tests::ring_vehicle(6, 30.0), tests::ring_vehicle(8, 22.5)}) {
    RehearsalOptions options;
    options.settle_s = 20.0;
    const RehearsalResult result =
        excitation::rehearse(vehicle, tests::quiet_schedule(vehicle, 60.0), options);
    CHECK(result.excursions.exceeded.empty());
    CHECK(result.excursions.drift_m < 2.0);
    CHECK(result.excursions.climb_m < 1.5);
    CHECK(result.log.motor_command.cols() == static_cast<Eigen::Index>(vehicle.airframe->rotors.size()));
  }
}

TEST_CASE("rehearsal: the logged demand is what the mixer receives") {
  const ident::Vehicle vehicle = tests::tern();
  const RehearsalResult result =
      excitation::rehearse(vehicle, one_doublet(vehicle, ident::Axis::heave, 0.06), {});
  // Tern's mixer is ±1: the mean command is hover plus the heave demand, tilt compensation and excitation
  // included.
  const double hover = excitation::hover_command(*vehicle.airframe);
  for (Eigen::Index k = 0; k < result.log.time_s.size(); k += 37) {
    REQUIRE_FALSE(result.log.saturated(k));
    CHECK(result.log.motor_command.row(k).mean() - hover == Approx(result.log.demand(k, 3)).margin(1e-14));
  }
}

TEST_CASE("rehearsal: a limit that is exceeded is named with its record and time") {
  ident::Vehicle vehicle = tests::tern();
  vehicle.limits.rate_deg_s = 40.0;
  const RehearsalResult result =
      excitation::rehearse(vehicle, one_doublet(vehicle, ident::Axis::roll, 0.05), {});
  REQUIRE(result.excursions.exceeded.size() == 1);
  const std::string& sentence = result.excursions.exceeded.front();
  INFO(sentence);
  CHECK(sentence.find("rate reached") == 0);
  CHECK(sentence.find("in roll doublet") != std::string::npos);
  CHECK(sentence.find("limit is 40") != std::string::npos);
  REQUIRE(result.excursions.by_record.size() == 1);
  CHECK(result.excursions.by_record.front().exceeds);
}

TEST_CASE("rehearsal: a vehicle that is lost says so, and its log ends there") {
  ident::Vehicle vehicle = tests::tern();
  vehicle.loops[ident::loop_index(ident::Loop::roll_rate)]->kp *= -1.0;
  const Schedule schedule = tests::quiet_schedule(vehicle, 30.0);
  RehearsalOptions options;
  options.settle_s = 0.0;
  const RehearsalResult result = excitation::rehearse(vehicle, schedule, options);
  CHECK(result.excursions.diverged);
  REQUIRE_FALSE(result.excursions.exceeded.empty());
  CHECK(result.excursions.exceeded.front().find("lost") != std::string::npos);
  CHECK(result.log.time_s.size() < 30 * 400);
  CHECK(result.log.demand.rows() == result.log.time_s.size());
  CHECK(result.log.motor_command.allFinite());

  // Lost while settling: there is nothing to log.
  options.settle_s = 30.0;
  const RehearsalResult early = excitation::rehearse(vehicle, schedule, options);
  CHECK(early.excursions.diverged);
  CHECK(early.log.time_s.size() == 0);
}

TEST_CASE("rehearsal: what is missing or does not fit is refused") {
  const ident::Vehicle good = tests::tern();
  SECTION("no airframe") {
    ident::Vehicle vehicle = good;
    vehicle.airframe.reset();
    CHECK_THROWS_AS(excitation::rehearse(vehicle, tests::quiet_schedule(good, 1.0), {}), ident::Failure);
  }
  SECTION("a loop") {
    ident::Vehicle vehicle = good;
    vehicle.loops[ident::loop_index(ident::Loop::heading)].reset();
    CHECK_THROWS_WITH(excitation::rehearse(vehicle, tests::quiet_schedule(good, 1.0), {}),
                      Catch::Contains("heading"));
  }
  SECTION("a schedule for another loop rate") {
    Schedule schedule = tests::quiet_schedule(good, 1.0);
    schedule.sample_rate_hz = 250.0;
    CHECK_THROWS_WITH(excitation::rehearse(good, schedule, {}), Catch::Contains("250"));
  }
  SECTION("a negative settling time") {
    RehearsalOptions options;
    options.settle_s = -1.0;
    CHECK_THROWS_AS(excitation::rehearse(good, tests::quiet_schedule(good, 1.0), options), ident::Failure);
  }
}

TEST_CASE("log: columns, order and digits of the CSV") {
  const ident::Vehicle vehicle = tests::tern();
  const RehearsalResult result =
      excitation::rehearse(vehicle, one_doublet(vehicle, ident::Axis::yaw, 0.06), {});
  const std::string csv = excitation::log_to_csv(result.log);
  CHECK(first_line(csv) ==
        "time_s,excite_roll,excite_pitch,excite_yaw,excite_heave,demand_roll,demand_pitch,demand_yaw,demand_"
        "heave,"
        "gyro_x,gyro_y,gyro_z,roll,pitch,heading,accel_x,accel_y,accel_z,north,east,down,"
        "velocity_north,velocity_east,velocity_down,motor_1,motor_2,motor_3,motor_4");
  std::istringstream lines(csv);
  std::string line;
  std::getline(lines, line);
  Eigen::Index row = 0;
  while (std::getline(lines, line)) {
    if (row % 97 == 0) {
      std::istringstream cells(line);
      std::string cell;
      std::vector<double> values;
      while (std::getline(cells, cell, ',')) values.push_back(std::stod(cell));
      REQUIRE(values.size() == 28);
      CHECK(line.substr(0, line.find(',')).size() >= 8);  // six decimals of seconds
      CHECK(values[0] == Approx(result.log.time_s(row)).margin(5e-7));
      // Single precision, 6e-8, and the shortest decimals that give it back, as much again.
      CHECK(values[3] == Approx(result.log.excitation(row, 2)).epsilon(1.2e-7));
      CHECK(values[8] == Approx(result.log.demand(row, 3)).epsilon(1.2e-7));
      CHECK(values[11] == Approx(result.log.rate_rad_s(row, 2)).epsilon(1.2e-7));
      CHECK(values[17] == Approx(result.log.specific_force_m_s2(row, 2)).epsilon(1.2e-7));
      CHECK(values[20] == Approx(result.log.position_m(row, 2)).epsilon(1.2e-7));
      CHECK(values[27] == Approx(result.log.motor_command(row, 3)).epsilon(1.2e-7));
    }
    ++row;
  }
  CHECK(row == result.log.time_s.size());
}
