// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/error_region.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <random>

#include "ident/failure.h"

namespace {

using namespace hoverwright::ident;
using Complex = std::complex<double>;

const Complex kA{1.2, -0.7}, kB{0.9, 0.4};
const PairNoise kNoise{0.02, 0.015, {0.006, -0.008}};

/// F(2, 2q) quantile in closed form: P(F > x) = (1 + x/q)^-q.
double f_quantile(double q, double confidence) {
  return q * (std::pow(1.0 - confidence, -1.0 / q) - 1.0);
}

TEST_CASE("Fieller disc: its boundary is where the inequality turns into an equality") {
  const double q = 20.0, f = f_quantile(q, 0.95);
  const ErrorRegion region = fieller_region(kA, kB, kNoise, q, 0.95);
  REQUIRE(region.bounded);
  double lowest = 1e9, highest = 0.0, widest = 0.0;
  for (int k = 0; k < 3600; ++k) {
    const Complex edge = region.centre + std::polar(region.radius, k * M_PI / 1800.0);
    // Rounding of a handful of products of size one.
    CHECK(std::norm(kA - edge * kB) == Approx(f * kNoise.variance_of_error(edge)).epsilon(1e-11));
    lowest = std::min(lowest, std::abs(edge));
    highest = std::max(highest, std::abs(edge));
    widest = std::max(widest, std::abs(std::arg(edge * std::conj(kA / kB))));
    CHECK(in_fieller_region(region.centre + 0.999 * (edge - region.centre), kA, kB, kNoise, q, 0.95));
    CHECK_FALSE(in_fieller_region(region.centre + 1.001 * (edge - region.centre), kA, kB, kNoise, q, 0.95));
  }
  // Points 0.1° apart miss an extreme by at most radius · (0.05°)²/2 = 4e-7 radius.
  CHECK(region.gain_low == Approx(lowest).epsilon(1e-6));
  CHECK(region.gain_high == Approx(highest).epsilon(1e-6));
  REQUIRE(region.phase_half_width_rad);
  CHECK(*region.phase_half_width_rad == Approx(widest).epsilon(1e-3));
}

TEST_CASE("Fieller region is bounded exactly when |b|² exceeds F times the noise of b") {
  const double q = 20.0, f = f_quantile(q, 0.95);
  PairNoise noise{0.5, 0.0, {}};
  noise.bb = std::norm(kB) / f * (1.0 - 1e-9);
  CHECK(fieller_region(kA, kB, noise, q, 0.95).bounded);
  noise.bb = std::norm(kB) / f * (1.0 + 1e-9);
  const ErrorRegion open = fieller_region(kA, kB, noise, q, 0.95);
  CHECK_FALSE(open.bounded);
  CHECK(std::isinf(open.gain_high));
  CHECK_FALSE(open.phase_half_width_rad);
  // Very large responses lie in the unbounded region, and its nearest point to the origin is gain_low.
  noise.bb = 2.0 * std::norm(kB);
  noise.aa = 0.01;
  const ErrorRegion region = fieller_region(kA, kB, noise, q, 0.95);
  CHECK(in_fieller_region(1e6, kA, kB, noise, q, 0.95));
  REQUIRE(region.gain_low > 0.0);
  bool touched = false;
  for (int k = 0; k < 3600; ++k) {
    const Complex direction = std::polar(1.0, k * M_PI / 1800.0);
    CHECK_FALSE(in_fieller_region(region.gain_low * (1.0 - 1e-6) * direction, kA, kB, noise, q, 0.95));
    touched =
        touched || in_fieller_region(region.gain_low * (1.0 + 1e-4) * direction, kA, kB, noise, q, 0.95);
  }
  CHECK(touched);
}

TEST_CASE("Fieller region: without noise a point, and the phase is absent when the disc holds the origin") {
  const ErrorRegion point = fieller_region(kA, kB, {}, 20.0, 0.95);
  CHECK(point.bounded);
  CHECK(std::abs(point.centre - kA / kB) < 1e-15);
  CHECK(point.radius == 0.0);
  const ErrorRegion wide = fieller_region(0.1, 1.0, {1.0, 0.0, {}}, 20.0, 0.95);
  CHECK(wide.gain_low == 0.0);
  CHECK_FALSE(wide.phase_half_width_rad);
  CHECK_FALSE(fieller_region(1.0, 0.0, {1.0, 1.0, {}}, 20.0, 0.95).bounded);
  CHECK_THROWS_AS(fieller_region(kA, kB, kNoise, 20.0, 1.0), Failure);
  CHECK_THROWS_AS(fieller_region(kA, kB, kNoise, 0.0, 0.95), Failure);
}

TEST_CASE("Fieller region holds the truth at its rate with a covariance estimated from few samples") {
  // 20000 runs, seed 3, q = 5 samples of the noise, b as small as twice its noise. Binomial standard error
  // 0.0015; four of them.
  const int runs = 20000, q = 5;
  std::mt19937_64 random(3);
  std::normal_distribution<double> normal(0.0, std::sqrt(0.5));
  const auto draw = [&] { return Complex(normal(random), normal(random)); };
  const Complex truth{1.0, -2.0}, b{1.2, 1.6};
  int held = 0;
  for (int run = 0; run < runs; ++run) {
    const auto noise = [&] {
      const Complex nb = draw();
      return std::pair<Complex, Complex>(0.7 * draw() + Complex(0.3, 0.5) * nb, nb);
    };
    PairNoise covariance;
    for (int k = 0; k < q; ++k) {
      const auto [na, nb] = noise();
      covariance.aa += std::norm(na) / q;
      covariance.bb += std::norm(nb) / q;
      covariance.ab += na * std::conj(nb) / static_cast<double>(q);
    }
    const auto [na, nb] = noise();
    held += in_fieller_region(truth, truth * b + na, b + nb, covariance, q, 0.95) ? 1 : 0;
  }
  const double rate = static_cast<double>(held) / runs;
  INFO("coverage " << rate);
  CHECK(std::abs(rate - 0.95) < 4.0 * 0.0015);
}

}  // namespace
