// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/models/state_space.h"

#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>
#include <complex>
#include <numbers>

#include "ident/failure.h"
#include "tests/ident/models/vehicles.h"

using namespace hoverwright::ident;
using namespace hoverwright::tests;
using Complex = std::complex<double>;

namespace {

TransferFunction lag_with_delay(double delay_s) {
  TransferFunction transfer;
  transfer.gain = 3.0;
  transfer.poles = {-2.0};
  transfer.delay_s = delay_s;
  return transfer;
}

}  // namespace

TEST_CASE("state space: response of the controllable form equals the transfer function") {
  TransferFunction transfer;
  transfer.gain = -4.0;
  transfer.zeros = {Complex(-3.0), Complex(1.0, 5.0), Complex(1.0, -5.0)};
  transfer.poles = {Complex(-1.0, 20.0), Complex(-1.0, -20.0), Complex(-0.2)};
  const StateSpace system = state_space(transfer);
  CHECK(system.d(0, 0) == Approx(-4.0));
  for (double f : {0.01, 0.7, 3.0, 40.0}) {
    const Complex s(0.0, 2.0 * std::numbers::pi * f);
    const Eigen::MatrixXcd resolvent = s * Eigen::MatrixXcd::Identity(3, 3) - system.a;
    const Complex value = (system.c * resolvent.inverse() * system.b + system.d)(0, 0);
    CHECK(std::abs(value - transfer.response(f)) <
          1e-12 * std::abs(value) * 400.0);  // coefficients up to 400
  }
}

TEST_CASE(
    "state space: simulated step equals the exact step response at every fraction of a sample of delay") {
  constexpr double kRate = 50.0;
  // -0.013 s: taken ahead of the sample; 0.06 s: whole samples.
  for (double delay : {-0.013, 0.0, 0.004, 0.0199, 0.02, 0.0333, 0.06}) {
    INFO("delay " << delay);
    const SampledStateSpace held = sample_with_hold(state_space(lag_with_delay(delay)), kRate);
    const Eigen::MatrixXd output = simulate(held, Eigen::MatrixXd::Ones(60, 1));
    for (Eigen::Index k = 0; k < output.rows(); ++k) {
      const double since = static_cast<double>(k) / kRate - delay;
      const double exact = since <= 0.0 ? 0.0 : 1.5 * (1.0 - std::exp(-2.0 * since));
      CHECK(std::abs(output(k, 0) - exact) < 1e-12);  // 60 steps of rounding
    }
  }
}

TEST_CASE("state space: direct feedthrough and two inputs pass through the delay") {
  StateSpace system{-Eigen::MatrixXd::Identity(1, 1), Eigen::RowVector2d(1.0, 2.0),
                    Eigen::MatrixXd::Identity(1, 1), Eigen::RowVector2d(0.5, -1.0), 0.025};
  const SampledStateSpace held = sample_with_hold(system, 100.0);
  Eigen::MatrixXd input = Eigen::MatrixXd::Zero(10, 2);
  input(0, 1) =
      1.0;  // one sample of the second input: on the output from 0.025 s to 0.035 s, seen at sample 3
  const Eigen::MatrixXd output = simulate(held, input);
  CHECK(output(2, 0) == 0.0);
  CHECK(output(3, 0) == Approx(2.0 * (1.0 - std::exp(-0.005)) - 1.0).epsilon(1e-12));
  CHECK(output(4, 0) == Approx(2.0 * (1.0 - std::exp(-0.01)) * std::exp(-0.005)).epsilon(1e-12));
}

TEST_CASE("state space: a pure gain has no states") {
  TransferFunction gain;
  gain.gain = 2.5;
  const SampledStateSpace held = sample_with_hold(state_space(gain), 100.0);
  CHECK(held.response(3.0)(0, 0) == Complex(2.5, 0.0));
  CHECK(simulate(held, values({1.0, -2.0}))(1, 0) == -5.0);
}

TEST_CASE("state space: what cannot be is refused") {
  TransferFunction improper;
  improper.gain = 1.0;
  improper.zeros = {Complex(-1.0)};
  CHECK_THROWS_WITH(state_space(improper), Catch::Contains("improper"));
  TransferFunction lonely = lag_with_delay(0.0);
  lonely.poles = {Complex(-1.0, 2.0)};
  CHECK_THROWS_WITH(state_space(lonely), Catch::Contains("conjugates"));
  CHECK_THROWS_WITH(sample_with_hold(state_space(lag_with_delay(-0.02)), 50.0),
                    Catch::Contains("more than a sample ahead"));
  CHECK_THROWS_WITH(sample_with_hold(state_space(lag_with_delay(0.0)), -1.0), Catch::Contains("sample rate"));
  StateSpace wrong = state_space(lag_with_delay(0.0));
  wrong.c = Eigen::MatrixXd::Zero(1, 2);
  CHECK_THROWS_WITH(sample_with_hold(wrong, 50.0), Catch::Contains("sizes"));
  const SampledStateSpace held = sample_with_hold(state_space(lag_with_delay(0.0)), 50.0);
  CHECK_THROWS_WITH(simulate(held, Eigen::MatrixXd::Zero(5, 2)), Catch::Contains("2 inputs given, 1 needed"));
}
