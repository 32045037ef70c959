// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/cascade.h"

#include <Eigen/Dense>
#include <Eigen/Eigenvalues>
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <complex>
#include <numbers>
#include <optional>
#include <random>

#include "ident/failure.h"
#include "ident/loops/cascade_model.h"
#include "ident/loops/discrete_filters.h"
#include "tests/ident/loops/tern_axis.h"

using namespace hoverwright::ident;
using namespace hoverwright::tests;
using std::numbers::pi;
using Complex = std::complex<double>;

namespace {

/// The cascade as it flies: sampled plant, LowPass2 and one Pid per loop, position before velocity before
/// angle before rate, all in one sample.
class Flight {
 public:
  Flight(const CascadeSetup& setup, SampledStateSpace plant, const std::vector<LoopGains>& gains)
      : plant_(std::move(plant)), state_(Eigen::VectorXd::Zero(plant_.a.rows())) {
    if (setup.gyro_filter_hz && setup.axis != Axis::heave)
      filter_.emplace(*setup.gyro_filter_hz, setup.sample_rate_hz);
    for (std::size_t i = 0; i < gains.size(); ++i) {
      loops_.emplace_back(gains[i], setup.sample_rate_hz);
      factors_.push_back(output_factor(setup.axis, i));
    }
  }

  /// One sample with `added` on top of the demand; the demand that acts.
  double step(double added) {
    Eigen::VectorXd measured = plant_.c * state_;
    if (filter_) measured[0] = filter_->step(measured[0]);
    double set_point = 0.0;
    for (std::size_t i = loops_.size(); i-- > 0;)
      set_point = factors_[i] * loops_[i].step(set_point, measured[static_cast<Eigen::Index>(i)]);
    const double demand = set_point + added;
    state_ = plant_.a * state_ + plant_.b * demand;
    return demand;
  }

 private:
  SampledStateSpace plant_;
  Eigen::VectorXd state_;
  std::optional<LowPass2> filter_;
  std::vector<Pid> loops_;
  std::vector<double> factors_;
};

/// Random roll axis with random gains for `depth` loops, from tame to wild.
struct RandomCase {
  CascadeSetup setup = tern_setup(Axis::roll);
  Eigen::VectorXd parameters = tern_roll();
  std::vector<LoopGains> gains;

  RandomCase(std::mt19937_64& random, std::size_t depth) {
    std::uniform_real_distribution<double> uniform(0.0, 1.0);
    const auto factor = [&](double span) { return std::pow(span, 2.0 * uniform(random) - 1.0); };
    parameters << 272.0 * factor(2.0), 4.0 * uniform(random), 0.045 * factor(2.0),
        0.00125 + 0.015 * uniform(random);
    if (uniform(random) < 0.3) setup.gyro_filter_hz.reset();
    gains.push_back(loop_gains(0.07 * factor(3.0), uniform(random) < 0.3 ? 0.0 : 0.2 * factor(5.0),
                               uniform(random) < 0.5 ? 0.0 : 0.003 * factor(3.0)));
    if (depth > 1)
      gains.push_back(loop_gains(4.0 * factor(4.0), uniform(random) < 0.7 ? 0.0 : 0.5 * factor(2.0)));
    if (depth > 2) gains.push_back(loop_gains(1.5 * factor(4.0), 0.3 * factor(3.0)));
    if (depth > 3) gains.push_back(loop_gains(0.6 * factor(4.0)));
  }

  [[nodiscard]] SampledStateSpace plant() const {
    return cascade_plant(setup, Structure::find("rate_motor_lag"), parameters);
  }
  [[nodiscard]] LoopGainSet set() const {
    LoopGainSet set{};
    for (std::size_t i = 0; i < gains.size(); ++i) set[loop_index(loops_of_axis(setup.axis)[i])] = gains[i];
    return set;
  }
};

Eigen::Index unstable_poles(const Eigen::MatrixXd& matrix) {
  return (Eigen::EigenSolver<Eigen::MatrixXd>(matrix, false).eigenvalues().cwiseAbs().array() >= 1.0).count();
}

}  // namespace

TEST_CASE("cascade: the innermost output is the structure's sampled response") {
  const Eigen::VectorXd f = log_grid(0.1, 199.0, 60);
  const auto check = [&](Axis axis, const char* name, const Eigen::VectorXd& parameters) {
    const Structure& structure = Structure::find(name);
    const Eigen::MatrixXcd plant = plant_responses(cascade_plant(tern_setup(axis), structure, parameters), f);
    const Eigen::VectorXcd expected = structure.sampled_response(parameters, f, 400.0);
    // Both are exact; subtraction near z = 1 costs |z - 1| = 1.6e-3 once per pole, so three digits of sixteen
    // each.
    CHECK((plant.col(0) - expected).cwiseQuotient(expected).cwiseAbs().maxCoeff() < 1e-9);
  };
  for (const double delay : {0.00125, 0.00375, 0.00725, 0.0131}) {  // none, one whole sample, fractions
    check(Axis::roll, "rate_damped", Eigen::Vector3d(60.0, 2.4, delay));
    check(Axis::roll, "rate_motor_lag", Eigen::Vector4d(272.0, 2.4, 0.045, delay));
    check(Axis::roll, "rate_motor_lag", Eigen::Vector4d(272.0, -0.4, 0.045, delay));
    check(Axis::yaw, "yaw_reaction", Eigen::Matrix<double, 5, 1>{10.0, 0.3, 0.045, 0.12, delay});
    check(Axis::heave, "climb_rate", Eigen::Vector4d(24.0, 0.8, 0.045, delay));
  }
}

TEST_CASE("cascade: outer outputs are the integrals they should be") {
  const Eigen::VectorXd f = log_grid(0.005, 190.0, 80);
  for (const Axis axis : {Axis::roll, Axis::pitch, Axis::yaw}) {
    const bool yaw = axis == Axis::yaw;
    const SampledStateSpace plant =
        cascade_plant(tern_setup(axis), Structure::find(yaw ? "yaw_reaction" : "rate_motor_lag"),
                      yaw ? tern_yaw() : tern_roll());
    const Eigen::MatrixXcd fast = plant_responses(plant, f);
    REQUIRE(fast.cols() == (yaw ? 2 : 4));
    for (Eigen::Index k = 0; k < f.size(); ++k) {
      const Eigen::VectorXcd general = plant.response(f[k]).col(0);
      // Four integrators at |z - 1| ≥ 8e-5: the general solve loses up to four digits at each.
      CHECK((fast.row(k).transpose() - general).cwiseQuotient(general).cwiseAbs().maxCoeff() < 1e-7);
    }
    // Far below the sample rate: rate/s, g·angle/(s + d), velocity/s; the hold's second-order terms are
    // (ωΔ)²/12 < 1e-6 below 0.3 Hz.
    for (Eigen::Index k = 0; f[k] < 0.2; ++k) {
      const Complex s(0.0, 2.0 * pi * f[k]);
      CHECK(std::abs(fast(k, 1) * s / fast(k, 0) - 1.0) < 5e-6);
      if (yaw) continue;
      CHECK(std::abs(fast(k, 2) * (s + 0.1) / (9.80665 * fast(k, 1)) - 1.0) < 5e-6);
      CHECK(std::abs(fast(k, 3) * s / fast(k, 2) - 1.0) < 5e-6);
    }
  }
}

TEST_CASE("cascade: heave acceleration is integrated to climb rate without a cancelled pole") {
  const auto setup = tern_setup(Axis::heave);
  const SampledStateSpace from_acceleration =
      cascade_plant(setup, Structure::find("heave_accel"), tern_heave());
  const SampledStateSpace from_rate = cascade_plant(setup, Structure::find("climb_rate"), tern_heave());
  CHECK(from_acceleration.a == from_rate.a);
  CHECK(from_acceleration.b == from_rate.b);
  // One pole at 1 only, the altitude's.
  CHECK((from_rate.a.diagonal().array() == 1.0).count() == 1);
}

TEST_CASE("cascade: the loop gains are those of the code that flies") {
  // S = 1/(1 + L) at the demand is the transform of the demand's answer to a unit impulse added to it.
  std::mt19937_64 random(3);
  int checked = 0;
  for (int run = 0; run < 60; ++run) {
    const RandomCase c(random, 1 + static_cast<std::size_t>(run % 4));
    const SampledStateSpace plant = c.plant();
    const double radius = spectral_radius(c.setup, plant, c.gains, c.gains.size());
    if (radius > 0.998) continue;  // the impulse response must die out within the samples below
    ++checked;
    const int samples = 16000;  // 0.998^16000 = 1e-14
    Flight flight(c.setup, plant, c.gains);
    const Eigen::VectorXd f = log_grid(0.05, 195.0, 12);
    Eigen::VectorXcd sensitivity = Eigen::VectorXcd::Zero(f.size());
    for (int k = 0; k < samples; ++k) {
      const double demand = flight.step(k == 0 ? 1.0 : 0.0);
      for (Eigen::Index i = 0; i < f.size(); ++i)
        sensitivity[i] += demand * std::polar(1.0, -2.0 * pi * f[i] * k / 400.0);
    }
    std::vector<ControllerResponse> controllers;
    for (std::size_t i = 0; i < c.gains.size(); ++i)
      controllers.push_back(controller_response(c.gains[i], 400.0, output_factor(Axis::roll, i), f));
    const CascadeGains gains =
        cascade_gains(plant_responses(plant, f), gyro_filter_response(c.setup, f), controllers);
    const Eigen::ArrayXcd predicted = 1.0 / (1.0 + gains.demand.array());
    // Rounding of 16000 terms, amplified by up to 1/|S| ~ 1e4 at the lowest frequency against an absolute
    // scale of one.
    CHECK((predicted - sensitivity.array()).abs().maxCoeff() < 1e-8);
  }
  CHECK(checked >= 15);
}

TEST_CASE("cascade: poles say what the code that flies does") {
  std::mt19937_64 random(5);
  int stable = 0, unstable = 0;
  for (int run = 0; run < 80; ++run) {
    const RandomCase c(random, 1 + static_cast<std::size_t>(run % 4));
    const SampledStateSpace plant = c.plant();
    const double radius = spectral_radius(c.setup, plant, c.gains, c.gains.size());
    // The outer states the loops do not measure integrate freely; the demand shows the loop alone.
    Flight flight(c.setup, plant, c.gains);
    const int settle = 4000, window = 4000;
    double early = 0.0, late = 0.0;
    for (int k = 0; k < settle + 2 * window; ++k) {
      const double demand = std::abs(flight.step(k == 0 ? 1.0 : 0.0));
      if (k >= settle && k < settle + window) early = std::max(early, demand);
      if (k >= settle + window) late = std::max(late, demand);
      if (demand > 1e200) break;
    }
    if (std::abs(radius - 1.0) < 2e-4) continue;  // grows or falls by less than a factor two over a window
    if (radius < 1.0) {
      ++stable;
      CHECK((late < early || late < 1e-12));
    } else {
      ++unstable;
      CHECK((late > early || early > 1e100 || late == 0.0));
      if (late > 0.0 && early < 1e100)
        CHECK(std::log(late / early) / window == Approx(std::log(radius)).margin(3e-4));
    }
  }
  CHECK(stable > 20);
  CHECK(unstable > 10);
}

TEST_CASE("cascade: Nyquist's count agrees with the poles at every place") {
  // Reference: the same axis with tame gains of the same kind, stable. The number of poles outside the unit
  // circle is then twice the difference of turns.
  std::mt19937_64 random(7);
  const Eigen::VectorXd f = log_grid(0.002, 199.9, 4000);
  int unstable = 0;
  for (int run = 0; run < 60; ++run) {
    RandomCase c(random, 2);
    for (LoopGains& loop : c.gains) loop.ki = 0.0;  // one asymptote at low frequency for all
    for (double* gain : {&c.gains[0].kp, &c.gains[0].kd}) *gain *= 4.0;  // wild enough for both kinds
    RandomCase tame = c;
    tame.gains = {loop_gains(0.01), loop_gains(0.3)};
    const SampledStateSpace plant = c.plant();
    const auto open = [&](const RandomCase& which) {
      std::vector<ControllerResponse> controllers;
      for (const LoopGains& g : which.gains) controllers.push_back(controller_response(g, 400.0, 1.0, f));
      return cascade_gains(plant_responses(plant, f), gyro_filter_response(c.setup, f), controllers);
    };
    const CascadeGains gains = open(c), reference = open(tame);
    REQUIRE(spectral_radius(c.setup, plant, tame.gains, 2) < 1.0);
    for (std::size_t depth = 1; depth <= 2; ++depth) {
      const auto poles = unstable_poles(closed_loop_matrix(c.setup, plant, c.gains, depth));
      unstable += poles > 0 ? 1 : 0;
      const Eigen::VectorXcd& loop = depth == 1 ? gains.loops[0] : gains.demand;
      const Eigen::VectorXcd& tame_loop = depth == 1 ? reference.loops[0] : reference.demand;
      CHECK(2 * (turns_around_minus_one(tame_loop) - turns_around_minus_one(loop)) == poles);
    }
  }
  CHECK(unstable > 10);
}

TEST_CASE("cascade: an unstable loop is called unstable though it crosses nothing") {
  // An axis that runs away (negative damping) with too little gain to hold it: |L| < 1 everywhere, so no
  // crossing to be worried about.
  LoopGainSet gains{};
  gains[loop_index(Loop::roll_rate)] = loop_gains(0.5 / 272.0);
  const CascadeAnalysis analysis =
      analyse_cascade(tern_setup(Axis::roll), gains, Structure::find("rate_motor_lag"),
                      Eigen::Vector4d(272.0, -1.0, 0.045, 0.00725), log_grid(0.01, 190.0, 400));
  const Margins& margins = analysis.loops.at(Loop::roll_rate);
  CHECK_FALSE(margins.phase_margin_deg);
  CHECK_FALSE(margins.crossover_hz);
  CHECK_FALSE(margins.stable);
}

TEST_CASE("cascade: every loop of every axis has margins, and delay costs the inner ones phase") {
  const Eigen::VectorXd f = log_grid(0.005, 195.0, 600);
  for (const Axis axis : kAxes) {
    if (axis == Axis::pitch) continue;
    const Structure& structure = Structure::find(axis == Axis::roll  ? "rate_motor_lag"
                                                 : axis == Axis::yaw ? "yaw_reaction"
                                                                     : "heave_accel");
    Eigen::VectorXd parameters = axis == Axis::roll  ? tern_roll()
                                 : axis == Axis::yaw ? tern_yaw()
                                                     : tern_heave();
    const auto now = analyse_cascade(tern_setup(axis), tern_gains(), structure, parameters, f);
    CHECK(now.loops.size() == loops_of_axis(axis).size());
    const Loop inner = loops_of_axis(axis)[0];
    const double extra = 0.003;
    parameters[structure.index_of("delay")] += extra;
    const auto later = analyse_cascade(tern_setup(axis), tern_gains(), structure, parameters, f);
    for (const auto& [loop, margins] : now.loops) {
      INFO(loop_name(loop));
      CHECK(margins.stable);
      REQUIRE(margins.phase_margin_deg);
      // Velocity and position loops cross two decades lower, where the inner loops' phase need not fall with
      // delay.
      if (loop == inner || loop == loops_of_axis(axis)[1])
        CHECK(*margins.phase_margin_deg > *later.loops.at(loop).phase_margin_deg);
    }
    // The innermost loop loses exactly 360° f τ (grid of 600 points: 0.02 in ln f, squared over 8 is 5e-5
    // rad).
    const Margins& rate = now.loops.at(inner);
    CHECK(*rate.phase_margin_deg - *later.loops.at(inner).phase_margin_deg ==
          Approx(360.0 * *rate.crossover_hz * extra).margin(0.02));
  }
}

TEST_CASE("cascade: gaps, wrong structures and impossible delays are refused") {
  const Eigen::VectorXd f = log_grid(0.01, 190.0, 100);
  const Structure& structure = Structure::find("rate_motor_lag");
  LoopGainSet gap = tern_gains();
  gap[loop_index(Loop::roll_angle)].reset();
  CHECK_THROWS_WITH(analyse_cascade(tern_setup(Axis::roll), gap, structure, tern_roll(), f),
                    Catch::Matchers::Contains("velocity_y") && Catch::Matchers::Contains("roll_angle"));
  CHECK_THROWS_WITH(analyse_cascade(tern_setup(Axis::roll), LoopGainSet{}, structure, tern_roll(), f),
                    Catch::Matchers::Contains("no loops"));
  CHECK_THROWS_WITH(cascade_plant(tern_setup(Axis::roll), Structure::find("heave_accel"), tern_heave()),
                    Catch::Matchers::Contains("heave_accel"));
  CHECK_THROWS_WITH(cascade_plant(tern_setup(Axis::heave), structure, tern_roll()),
                    Catch::Matchers::Contains("rate_motor_lag"));
  CHECK_THROWS_WITH(
      cascade_plant(tern_setup(Axis::roll), structure, Eigen::Vector4d(272.0, 2.4, 0.045, 0.001)),
      Catch::Matchers::Contains("half sample"));
}
