// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/channel_health.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <random>

#include "ident/failure.h"

using namespace hoverwright::ident;
using Eigen::Index;
using Eigen::VectorXd;

namespace {

constexpr Index kRows = 1000;

LogTable log_of(std::vector<std::pair<std::string, VectorXd>> columns) {
  LogTable log;
  log.source = "flight.csv";
  for (auto& [name, values] : columns) {
    log.names.push_back(name);
    log.columns.push_back(values);
    log.missing_cells.push_back(0);
  }
  return log;
}

VectorXd time_column(double period = 0.01, double start = 0.0) {
  return VectorXd::LinSpaced(kRows, start, start + period * static_cast<double>(kRows - 1));
}

VectorXd noise(unsigned seed) {
  std::mt19937 random(seed);
  std::normal_distribution<double> normal;
  VectorXd values(kRows);
  for (double& value : values) value = normal(random);
  return values;
}

ChannelHealth health_of(const VectorXd& values) {
  const LogTable log = log_of({{"t", time_column()}, {"x", values}});
  return examine_channels(log, examine_time(log, "t", 1.0)).at(0);
}

}  // namespace

TEST_CASE("time: rate, jitter, gaps, repeated and backward stamps are counted") {
  VectorXd stamps = time_column();
  stamps.tail(500).array() += 0.3;
  stamps[700] = stamps[699];
  stamps[800] = stamps[798];
  const TimeHealth health = examine_time(log_of({{"t", stamps}, {"x", noise(1)}}), "t", 1.0);
  CHECK(health.rate_hz == Approx(100.0).epsilon(1e-3));
  CHECK(health.longest_gap_s == Approx(0.31));
  CHECK(health.longest_gap_at_s == Approx(4.99));
  CHECK(health.duplicates == 1);
  CHECK(health.backward_steps == 1);
  CHECK(health.samples == kRows);
  CHECK(health.duration_s == Approx(10.29));
  CHECK_FALSE(health.epoch);
}

TEST_CASE("time: jitter is the rms of the steps") {
  VectorXd stamps = time_column();
  for (Index i = 0; i < kRows; i += 2) stamps[i] += 0.001;  // steps of 9 and 11 ms
  const TimeHealth health = examine_time(log_of({{"t", stamps}, {"x", noise(1)}}), "t", 1.0);
  CHECK(health.jitter_s == Approx(0.001).epsilon(1e-3));
  CHECK(health.rate_hz == Approx(100.0).epsilon(2e-4));
}

TEST_CASE("time: epochs are told from times since a start, in every unit") {
  for (const double unit_s : {1.0, 1e-3, 1e-6}) {
    const VectorXd epoch = time_column(0.01 / unit_s, 1772429357.8 / unit_s);
    CHECK(examine_time(log_of({{"t", epoch}, {"x", noise(1)}}), "t", unit_s).epoch);
    const VectorXd relative = time_column(0.01 / unit_s, 120.0 / unit_s);
    const TimeHealth health = examine_time(log_of({{"t", relative}, {"x", noise(1)}}), "t", unit_s);
    CHECK_FALSE(health.epoch);
    CHECK(health.rate_hz == Approx(100.0));
  }
}

TEST_CASE("time: the column is found by rising, by name before others") {
  const VectorXd count = VectorXd::LinSpaced(kRows, 0.0, kRows - 1.0);
  CHECK(examine_time(log_of({{"x", noise(1)}, {"clock", time_column()}}), "", 1.0).name == "clock");
  CHECK(examine_time(log_of({{"row", count}, {"Time", time_column()}}), "", 1.0).name == "Time");
  VectorXd repeated = time_column();
  repeated[500] = repeated[499];
  CHECK(examine_time(log_of({{"x", noise(1)}, {"timestamp", repeated}}), "", 1.0).name == "timestamp");
  CHECK_THROWS_AS(examine_time(log_of({{"x", noise(1)}, {"y", noise(2)}}), "", 1.0), Failure);
  CHECK_THROWS_AS(examine_time(log_of({{"t", VectorXd::Zero(kRows)}, {"y", noise(2)}}), "t", 1.0), Failure);
  CHECK_THROWS_AS(examine_time(log_of({{"x", noise(1)}, {"t", time_column()}}), "time", 1.0), Failure);
}

TEST_CASE("channel: statistics, also on a large constant part") {
  const VectorXd values = noise(3);
  const ChannelHealth health = health_of(values.array() + 1e6);
  const double mean = values.mean();
  CHECK(health.mean - 1e6 == Approx(mean).margin(1e-9));  // values near 1e6 resolve 1e-10
  CHECK(health.standard_deviation ==
        Approx(std::sqrt((values.array() - mean).square().mean())).epsilon(1e-8));
  CHECK(health.minimum == values.minCoeff() + 1e6);
  CHECK(health.update_hz == Approx(100.0).epsilon(1e-6));
  CHECK_FALSE(health.constant);
  CHECK_FALSE(health.step.has_value());
  CHECK(health.clipped_share == 0.0);
}

TEST_CASE("channel: constant, clipped, coarse, slow and missing are seen") {
  CHECK(health_of(VectorXd::Constant(kRows, 2.0)).constant);
  CHECK(health_of(VectorXd::Constant(kRows, 2.0)).update_hz == 0.0);

  VectorXd sine(kRows);
  for (Index i = 0; i < kRows; ++i) sine[i] = std::sin(0.05 * static_cast<double>(i));
  CHECK(health_of(sine).clipped_share == 0.0);
  const VectorXd cut = sine.cwiseMin(0.5).cwiseMax(-0.8);
  // |sin| beyond 0.5 above and 0.8 below: (pi - 2 asin 0.5 + pi - 2 asin 0.8) / 2 pi of a period; the log
  // holds 8 periods, whose ends count at most 3 samples each.
  const double expected = (2.0 * M_PI - 2.0 * std::asin(0.5) - 2.0 * std::asin(0.8)) / (2.0 * M_PI);
  CHECK(health_of(cut).clipped_share == Approx(expected).margin(8 * 2 * 3.0 / kRows));

  const VectorXd coarse = (sine.array() * 20.0).round() / 20.0;
  REQUIRE(health_of(coarse).step.has_value());
  CHECK(*health_of(coarse).step == Approx(0.05));

  VectorXd slow = noise(4);
  for (Index i = 0; i < kRows; ++i) slow[i] = slow[i - i % 10];
  CHECK(health_of(slow).update_hz == Approx(10.0).epsilon(0.02));

  VectorXd holes = noise(5);
  for (Index i = 0; i < kRows; i += 4) holes[i] = std::numeric_limits<double>::quiet_NaN();
  CHECK(health_of(holes).missing_share == 0.25);
  const ChannelHealth none = health_of(VectorXd::Constant(kRows, std::numeric_limits<double>::quiet_NaN()));
  CHECK(none.missing_share == 1.0);
}
