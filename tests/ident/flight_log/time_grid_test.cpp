// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/time_grid.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <random>

using namespace hoverwright::ident;

TEST_CASE("sample period: even, lossy, jittering, rounded and gapped steps all give the period behind them") {
  CHECK(sample_period(std::vector<double>(100, 0.0025)) == Approx(0.0025).epsilon(1e-12));

  std::vector<double> lossy(1000, 0.0025);
  for (std::size_t i = 0; i < lossy.size(); i += 20) lossy[i] = 0.005;
  lossy[500] = 1.0;  // a gap
  CHECK(sample_period(lossy) == Approx(0.0025).epsilon(1e-12));

  // Stamps off by up to 30 % of a period: the steps sum to the time between the ends, so what is left is the
  // stamps' error at the ends over the length, 0.6 / 5000.
  std::mt19937 random(5);
  std::uniform_real_distribution<double> offset(-0.3, 0.3);
  std::vector<double> jittering;
  double before = offset(random);
  for (int i = 0; i < 5000; ++i) {
    const double after = offset(random);
    jittering.push_back(0.01 * (1.0 + after - before));
    before = after;
  }
  CHECK(sample_period(jittering) == Approx(0.01).epsilon(0.6 / 5000.0));

  std::vector<double> rounded;
  for (int i = 0; i < 1000; ++i) rounded.push_back(i % 2 == 0 ? 0.002 : 0.003);
  CHECK(sample_period(rounded) == Approx(0.0025).epsilon(1e-12));
}

TEST_CASE("sample period: the expected one decides where the stamps alone cannot") {
  // 800 Hz against a clock of 1 ms: 1, 1, 1, 2 ms. Alone this looks like 1 kHz with lost samples.
  std::vector<double> steps;
  for (int i = 0; i < 1000; ++i) steps.push_back(i % 4 == 3 ? 0.002 : 0.001);
  CHECK(sample_period(steps) == Approx(0.001).epsilon(1e-9));
  CHECK(sample_period(steps, 1.0 / 800.0) == Approx(0.00125).epsilon(1e-9));
  CHECK(sample_period(steps, 1.0 / 500.0) == Approx(0.001).epsilon(1e-9));
}

TEST_CASE("time grid: a signal linear in time comes through any jitter exactly between the stamps") {
  std::mt19937 random(9);
  std::uniform_real_distribution<double> offset(-0.4, 0.4);
  Eigen::VectorXd time(500);
  for (Eigen::Index i = 0; i < time.size(); ++i) time[i] = 0.01 * (static_cast<double>(i) + offset(random));
  const TimeGrid grid = make_time_grid(time, 0.01);
  const Eigen::VectorXd values = grid.resample(3.0 * time);
  REQUIRE(values.size() == 500);
  CHECK(grid.lost == 0);
  CHECK(grid.moved > 250);  // three quarters of the stamps lie more than 0.1 off
  for (Eigen::Index k = 1; k + 1 < values.size(); ++k) {
    // Samples within a tenth of a period are taken as they are.
    CHECK(std::abs(values[k] / 3.0 - (grid.start_s + 0.01 * static_cast<double>(k))) <= 0.001 + 1e-12);
  }
}
