// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/models/structure.h"

#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>
#include <complex>
#include <numbers>

#include "ident/failure.h"
#include "ident/models/state_space.h"
#include "tests/ident/models/vehicles.h"

using namespace hoverwright::ident;
using namespace hoverwright::tests;
using Complex = std::complex<double>;

namespace {

constexpr double kRate = 400.0;

Eigen::VectorXd frequencies() {
  Eigen::VectorXd f(40);
  for (Eigen::Index k = 0; k < f.size(); ++k)
    f[k] = 0.05 * std::pow(199.0 / 0.05, static_cast<double>(k) / 39.0);
  return f;
}

double largest_relative(const Eigen::VectorXcd& value, const Eigen::VectorXcd& reference) {
  return ((value - reference).array().abs() / reference.array().abs()).maxCoeff();
}

using Response = Eigen::VectorXcd (*)(const Structure&, const Eigen::VectorXd&, const Eigen::VectorXd&,
                                      Eigen::MatrixXcd*);

Eigen::VectorXcd sampled(const Structure& s, const Eigen::VectorXd& p, const Eigen::VectorXd& f,
                         Eigen::MatrixXcd* jacobian) {
  return s.sampled_response(p, f, kRate, jacobian);
}
Eigen::VectorXcd continuous(const Structure& s, const Eigen::VectorXd& p, const Eigen::VectorXd& f,
                            Eigen::MatrixXcd* jacobian) {
  return s.continuous_response(p, f, jacobian);
}

/// Central difference of sixth order: error ~ h⁶ f⁽⁷⁾/140, rounding ~ ε |f| / h.
Eigen::VectorXcd numerical_derivative(Response response, const Structure& s, const Eigen::VectorXd& p,
                                      Eigen::Index i, double h, const Eigen::VectorXd& f) {
  const auto at = [&](double step) {
    Eigen::VectorXd shifted = p;
    shifted[i] += step;
    return response(s, shifted, f, nullptr);
  };
  return (45.0 * (at(h) - at(-h)) - 9.0 * (at(2 * h) - at(-2 * h)) + (at(3 * h) - at(-3 * h))) / (60.0 * h);
}

}  // namespace

TEST_CASE("structure: sampled response equals the state-space equivalent with exact hold and delay") {
  for (const auto& vehicle : axis_cases()) {
    INFO(vehicle.name);
    const Structure& structure = Structure::find(vehicle.structure);
    StateSpace system = state_space(structure.transfer_function(vehicle.parameters));
    system.input_delay_s -= 0.5 / kRate;
    const SampledStateSpace held = sample_with_hold(system, kRate);
    const Eigen::VectorXd f = frequencies();
    Eigen::VectorXcd reference(f.size());
    for (Eigen::Index k = 0; k < f.size(); ++k) reference[k] = held.response(f[k])(0, 0);
    // At 0.05 Hz zI - A is singular to (ωΔ)² ~ 6e-7 in the double-pole cases: 1e-16 / 6e-7 ~ 2e-10 in the
    // reference.
    CHECK(largest_relative(structure.sampled_response(vehicle.parameters, f, kRate), reference) < 1e-9);
  }
}

TEST_CASE("structure: sampled response is the sum of the held continuous response over all aliases") {
  for (const auto& vehicle : axis_cases()) {
    INFO(vehicle.name);
    const Structure& structure = Structure::find(vehicle.structure);
    TransferFunction model = structure.transfer_function(vehicle.parameters);
    model.delay_s -= 0.5 / kRate;
    const Eigen::VectorXd f = values({0.3, 2.0, 11.0, 60.0});
    const auto sampled_values = structure.sampled_response(vehicle.parameters, f, kRate);
    for (Eigen::Index k = 0; k < f.size(); ++k) {
      const auto held_alias = [&](int n) {
        const double alias_hz = f[k] + n * kRate;
        const Complex s(0.0, 2.0 * std::numbers::pi * alias_hz);
        return model.response(alias_hz) * (1.0 - std::exp(-s / kRate)) / (s / kRate);
      };
      constexpr int kAliases = 20000;
      Complex sum = held_alias(0);
      for (int n = 1; n <= kAliases; ++n) sum += held_alias(n) + held_alias(-n);
      // What is left out: sum over |n| > N of K/(ω_s n)·ω/(ω_s n), pairwise, at most 2 K ω / (ω_s² N) for one
      // excess pole, relative to |H| of at least K/(ω + 20)/20 (two poles fall faster):
      // 2·380·(400·20)/(2513²·20000) ~ 5e-5 at 60 Hz.
      CHECK(std::abs(sum - sampled_values[k]) < 5e-5 * std::abs(sampled_values[k]));
    }
  }
}

TEST_CASE("structure: analytic Jacobians equal sixth-order differences") {
  for (const auto& [response, name] :
       {std::pair<Response, const char*>{sampled, "sampled"}, {continuous, "continuous"}}) {
    for (const auto& vehicle : axis_cases()) {
      INFO(name << ", " << vehicle.name);
      const Structure& structure = Structure::find(vehicle.structure);
      const Eigen::VectorXd f = frequencies();
      Eigen::VectorXd p = vehicle.parameters;
      const Eigen::Index delay = structure.index_of("delay");
      // The delay derivative has a step at whole samples: keep every difference inside one sample.
      const double in_samples = p[delay] * kRate - 0.5;
      if (std::abs(in_samples - std::round(in_samples)) < 0.1) p[delay] += 0.3 / kRate;
      Eigen::MatrixXcd jacobian;
      response(structure, p, f, &jacobian);
      REQUIRE(jacobian.cols() == p.size());
      for (Eigen::Index i = 0; i < p.size(); ++i) {
        INFO("parameter " << structure.parameters()[static_cast<std::size_t>(i)].name);
        const double h = i == delay ? 0.02 / kRate : 0.003 * std::max(std::abs(p[i]), 0.1);
        const Eigen::VectorXcd difference = numerical_derivative(response, structure, p, i, h, f);
        // Truncation ~ (h/distance to singularity)⁶, at most (0.01)⁶·7!/140 ~ 4e-11 relative; rounding
        // ~ 1e-14·|H| / (h |dH|), most 1e-14 / 0.003 / (a/|s+a|) ~ 1e-9 of the column's size.
        const double worst =
            ((jacobian.col(i) - difference).array().abs()).maxCoeff() / difference.array().abs().maxCoeff();
        CHECK(worst < 1e-8);
      }
    }
  }
}

TEST_CASE("structure: response is continuous in the delay across whole samples") {
  for (const auto& vehicle : axis_cases()) {
    INFO(vehicle.name);
    const Structure& structure = Structure::find(vehicle.structure);
    const Eigen::VectorXd f = frequencies();
    for (int whole = 0; whole < 4; ++whole) {
      Eigen::VectorXd before = vehicle.parameters, after = vehicle.parameters;
      const double edge = (whole + 0.5) / kRate;
      before[structure.index_of("delay")] = edge - 1e-12;
      after[structure.index_of("delay")] = edge + 1e-12;
      // 2e-12 s times ω <= 1250 rad/s, times up to a hundred where a two-pole response passes near its zero
      // at the highest frequency: 3e-7. A wrong whole sample would show as ωΔ = 8e-4 even at the lowest
      // frequency.
      CHECK(largest_relative(structure.sampled_response(before, f, kRate),
                             structure.sampled_response(after, f, kRate)) < 1e-6);
    }
  }
}

TEST_CASE("structure: gains at zero frequency, and half a sample of the delay is the hold") {
  const Eigen::VectorXd zero = values({0.0});
  const auto gain = [&](const char* name, const Eigen::VectorXd& p) {
    return Structure::find(name).sampled_response(p, zero, kRate)[0];
  };
  // Rounding only: 1 - exp(-aΔ) is computed without cancellation.
  CHECK(std::abs(gain("rate_damped", values({55, 0.8, 0.012})) - 55 / 0.8) < 1e-10);
  CHECK(std::abs(gain("rate_motor_lag", values({230, 2, 0.05, 0.008})) - 115.0) < 1e-10);
  CHECK(std::abs(gain("yaw_reaction", values({10, 0.3, 0.05, 0.1, 0.008})) - 10 / 0.3) < 1e-10);
  CHECK(std::abs(gain("heave_accel", values({24, 0.8, 0.05, 0.008}))) < 1e-10);
  CHECK(std::abs(gain("climb_rate", values({24, 0.8, 0.05, 0.008})) - 30.0) < 1e-10);

  // At 5 Hz the hold's gain is sinc(5/400): 1 - 2.6e-4, aliases of a two-pole model add ~ (5/400)² ~ 1.6e-4.
  const Structure& roll = Structure::find("rate_motor_lag");
  const Eigen::VectorXd p = values({230, 2, 0.05, 0.008}), f = values({5.0});
  CHECK(largest_relative(roll.sampled_response(p, f, kRate), roll.continuous_response(p, f)) < 1e-3);
}

TEST_CASE("structure: transfer function and continuous response are the same model") {
  for (const auto& vehicle : axis_cases()) {
    INFO(vehicle.name);
    const Structure& structure = Structure::find(vehicle.structure);
    const TransferFunction transfer = structure.transfer_function(vehicle.parameters);
    const Eigen::VectorXd f = frequencies();
    const Eigen::VectorXcd response = structure.continuous_response(vehicle.parameters, f);
    for (Eigen::Index k = 0; k < f.size(); ++k)
      CHECK(std::abs(transfer.response(f[k]) - response[k]) < 1e-12 * std::abs(response[k]));  // rounding
  }
}

TEST_CASE("structure: unknown names and impossible values are refused with the reason") {
  CHECK(Structure::names().size() == 5);
  CHECK_THROWS_WITH(Structure::find("rate_motor_lags"), Catch::Contains("did you mean \"rate_motor_lag\""));
  const Structure& roll = Structure::find("rate_motor_lag");
  CHECK(roll.has_parameter("motor_lag"));
  CHECK_FALSE(roll.has_parameter("reaction_lead"));
  CHECK_THROWS_WITH(roll.index_of("lag"), Catch::Contains("has no parameter \"lag\""));
  const Eigen::VectorXd f = values({1.0});
  CHECK_THROWS_WITH(roll.continuous_response(values({1, 2, 3}), f),
                    Catch::Contains("has 4 parameters, 3 given"));
  CHECK_THROWS_WITH(roll.sampled_response(values({1, 2, -0.1, 0.01}), f, kRate),
                    Catch::Contains("motor_lag"));
  CHECK_THROWS_WITH(roll.sampled_response(values({0, 2, 0.1, 0.01}), f, kRate),
                    Catch::Contains("effectiveness"));
  CHECK_THROWS_WITH(roll.sampled_response(values({1, 2, 0.1, 0.01}), f, 0.0), Catch::Contains("sample rate"));
}
