// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/margins.h"

#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>
#include <complex>
#include <functional>
#include <numbers>
#include <random>
#include <unsupported/Eigen/Polynomials>

#include "ident/failure.h"

using namespace hoverwright::ident;
using std::numbers::pi;
using Complex = std::complex<double>;

namespace {

struct Samples {
  Eigen::VectorXd frequency_hz;
  Eigen::VectorXcd loop;
};

/// L(jω) on a logarithmic grid of `points` between two angular frequencies.
Samples sample(const std::function<Complex(Complex)>& loop, double low_rad_s, double high_rad_s, int points) {
  Samples samples{Eigen::VectorXd(points), Eigen::VectorXcd(points)};
  for (int k = 0; k < points; ++k) {
    const double omega = low_rad_s * std::pow(high_rad_s / low_rad_s, k / (points - 1.0));
    samples.frequency_hz[k] = omega / (2.0 * pi);
    samples.loop[k] = loop(Complex(0.0, omega));
  }
  return samples;
}

Margins margins_of(const Samples& s, bool stable) {
  return read_margins(s.frequency_hz, s.loop, stable);
}

}  // namespace

// Interpolation error everywhere below: step h in ln ω, second derivatives of ln|L| and of the phase of order
// one, so h²/8. With 4000 points over 4 decades h = 2.3e-3 and the error is 7e-7 relative or radian: 4e-5
// degrees, 6e-6 dB.
constexpr double kDegrees = 2e-4, kDecibels = 5e-5, kRelative = 5e-6;

TEST_CASE("margins: 1/(s(s+1)) has its handbook values and no gain margin") {
  const auto m = margins_of(sample([](Complex s) { return 1.0 / (s * (s + 1.0)); }, 1e-2, 1e2, 4000), true);
  const double crossover = std::sqrt((std::sqrt(5.0) - 1.0) / 2.0);  // ω²(ω²+1) = 1
  const double margin = pi / 2.0 - std::atan(crossover);
  REQUIRE(m.phase_margin_deg);
  CHECK(*m.phase_margin_deg == Approx(margin * 180.0 / pi).margin(kDegrees));
  CHECK(*m.crossover_hz == Approx(crossover / (2.0 * pi)).epsilon(kRelative));
  CHECK(*m.delay_margin_s == Approx(margin / crossover).epsilon(kRelative));
  CHECK_FALSE(m.gain_margin_db);
  CHECK_FALSE(m.gain_reduction_db);
  CHECK_FALSE(m.phase_crossover_hz);
  // |1/(1+L)|² = (x²+x)/(x²-x+1) with x = ω², largest at x = (1+√3)/2. A maximum between grid points is
  // missed by order h².
  const double x = (1.0 + std::sqrt(3.0)) / 2.0;
  CHECK(m.sensitivity_peak == Approx(std::sqrt((x * x + x) / (x * x - x + 1.0))).epsilon(kRelative));
}

TEST_CASE("margins: integrator with delay") {
  const double gain = 20.0, delay = 0.03;
  const auto loop = [&](Complex s) { return gain / s * std::exp(-delay * s); };
  const auto m = margins_of(sample(loop, 1.0, 1e4, 40000), true);
  // The phase turns by ωτ: its curvature in ln ω at the crossing is 1.6, h = 2.3e-4.
  CHECK(*m.gain_margin_db == Approx(20.0 * std::log10(pi / (2.0 * gain * delay))).margin(kDecibels));
  CHECK(*m.phase_crossover_hz == Approx(1.0 / (4.0 * delay)).epsilon(kRelative));
  CHECK(*m.phase_margin_deg == Approx(90.0 - gain * delay * 180.0 / pi).margin(kDegrees));
  CHECK(*m.delay_margin_s == Approx(pi / (2.0 * gain) - delay).epsilon(1e-4));
  CHECK(*m.crossover_hz == Approx(gain / (2.0 * pi)).epsilon(kRelative));
}

TEST_CASE("margins: a conditionally stable loop has a reduction margin") {
  // K (s+1)²/s³ crosses -180° upward at ω = 1 where |L| = 2K; Routh: stable for K > 1/2.
  const double gain = 2.0;
  const auto m = margins_of(
      sample([&](Complex s) { return gain * (s + 1.0) * (s + 1.0) / (s * s * s); }, 1e-2, 1e2, 4000), true);
  CHECK_FALSE(m.gain_margin_db);
  CHECK(*m.gain_reduction_db == Approx(20.0 * std::log10(2.0 * gain)).margin(kDecibels));
}

TEST_CASE("margins: the smallest over all crossings is the one that counts") {
  // A resonance at 10 rad/s lifts |L| above one again: three gain crossings, two with little phase left.
  const auto loop = [](Complex s) { return 1.0 / s * 100.0 / (s * s + 0.8 * s + 100.0); };
  const auto s = sample(loop, 1e-2, 1e3, 20000);
  const auto m = margins_of(s, false);
  int crossings = 0;
  double smallest = 1e9, highest_falling = 0.0;
  for (Eigen::Index k = 0; k + 1 < s.loop.size(); ++k) {
    const bool above = std::abs(s.loop[k]) > 1.0;
    if (above == (std::abs(s.loop[k + 1]) > 1.0)) continue;
    ++crossings;
    const double phase = std::arg(s.loop[k]);
    smallest = std::min(smallest, phase > 0.0 ? phase - pi : phase + pi);
    if (above) highest_falling = s.frequency_hz[k];
  }
  REQUIRE(crossings == 3);
  // Read at the grid point before the crossing; near this resonance the phase turns by at most 2Q = 25 per
  // unit of ln ω, and a step is 5.8e-4.
  CHECK(*m.phase_margin_deg == Approx(smallest * 180.0 / pi).margin(25.0 * 5.8e-4 * 180.0 / pi));
  CHECK(*m.crossover_hz == Approx(highest_falling).epsilon(1e-3));
}

TEST_CASE("margins: an unstable loop keeps its sign and has no delay margin") {
  const auto loop = [](Complex s) { return 10.0 / (s * (s + 1.0) * (s + 2.0)); };  // stable below a gain of 6
  const auto s = sample(loop, 1e-2, 1e2, 4000);
  const auto m = margins_of(s, false);
  CHECK(*m.phase_margin_deg < 0.0);
  CHECK(*m.gain_reduction_db == Approx(20.0 * std::log10(10.0 / 6.0)).margin(kDecibels));
  CHECK_FALSE(m.gain_margin_db);
  CHECK_FALSE(m.delay_margin_s);
  CHECK_FALSE(m.stable);
}

TEST_CASE("margins: nothing is extrapolated") {
  const auto loop = [](Complex s) { return 3.0 / (s * (s + 1.0) * (s + 2.0)); };
  // Crossover 0.97, phase crossover √2 rad/s.
  const auto below = margins_of(sample(loop, 1e-2, 0.9, 1000), true);
  CHECK_FALSE(below.phase_margin_deg);
  CHECK_FALSE(below.gain_margin_db);
  CHECK_FALSE(below.crossover_hz);
  const auto between = margins_of(sample(loop, 1e-2, 1.2, 1000), true);
  CHECK(between.phase_margin_deg);
  CHECK_FALSE(between.gain_margin_db);
  const auto above = margins_of(sample(loop, 1.1, 10.0, 1000), true);
  CHECK_FALSE(above.phase_margin_deg);
  CHECK(*above.gain_margin_db == Approx(20.0 * std::log10(2.0)).margin(1e-4));
}

TEST_CASE("margins: turns around -1 count the unstable closed-loop poles") {
  // Random stable loops without integrators and L(0) > 0: unstable closed-loop poles = -2 × (anticlockwise
  // turns over ω > 0).
  std::mt19937_64 random(11);
  std::uniform_real_distribution<double> uniform(0.0, 1.0);
  int unstable = 0;
  for (int run = 0; run < 300; ++run) {
    std::array<double, 4> pole{};
    for (double& p : pole) p = std::pow(10.0, 2.0 * uniform(random) - 1.0);
    const double gain = pole[0] * pole[1] * pole[2] * pole[3] * std::pow(10.0, 3.0 * uniform(random));
    const double zero = std::pow(10.0, 2.0 * uniform(random) - 1.0);
    const auto loop = [&](Complex s) {
      return gain * (1.0 + s / zero) / ((s + pole[0]) * (s + pole[1]) * (s + pole[2]) * (s + pole[3]));
    };
    Eigen::Matrix<double, 5, 1> polynomial;  // Π(s + p) + gain (1 + s/z), lowest power first
    polynomial << 1.0, 0.0, 0.0, 0.0, 0.0;
    for (int i = 0; i < 4; ++i) {
      for (int j = i + 1; j > 0; --j)
        polynomial[j] = polynomial[j - 1] + pole[static_cast<std::size_t>(i)] * polynomial[j];
      polynomial[0] *= pole[static_cast<std::size_t>(i)];
    }
    polynomial[0] += gain;
    polynomial[1] += gain / zero;
    const Eigen::PolynomialSolver<double, 4> roots(polynomial);
    const auto right = (roots.roots().real().array() > 0.0).count();
    unstable += right > 0 ? 1 : 0;
    CHECK(-2 * turns_around_minus_one(sample(loop, 1e-4, 1e4, 4000).loop) == right);
  }
  CHECK(unstable > 30);  // the test must have seen both kinds
  CHECK(unstable < 270);
}

TEST_CASE("margins: what cannot be read is refused") {
  Eigen::VectorXd f(3);
  f << 1.0, 2.0, 3.0;
  const Eigen::VectorXcd loop = Eigen::VectorXcd::Constant(3, Complex(0.5, -0.5));
  CHECK_NOTHROW(read_margins(f, loop, true));
  CHECK_THROWS_AS(read_margins(f.head(2), loop.head(2), true), Failure);
  CHECK_THROWS_AS(read_margins(f, loop.head(2), true), Failure);
  CHECK_THROWS_AS(read_margins(f.reverse(), loop, true), Failure);
  Eigen::VectorXd from_zero = f;
  from_zero[0] = 0.0;
  CHECK_THROWS_AS(read_margins(from_zero, loop, true), Failure);
  Eigen::VectorXcd broken = loop;
  broken[1] = Complex(std::nan(""), 0.0);
  CHECK_THROWS_AS(read_margins(f, broken, true), Failure);
}
