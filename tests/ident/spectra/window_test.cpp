// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/window.h"

#include <catch2/catch.hpp>
#include <random>

#include "ident/failure.h"
#include "ident/spectra/fft.h"
#include "ident/spectra/segments.h"

namespace {

using namespace hoverwright::ident;

TEST_CASE("Hann window: sums, noise bandwidth and the constant sum of squares at quarter-window hops") {
  const Eigen::Index length = 240;
  const Eigen::VectorXd window = hann_window(length);
  // Σw = N/2 and Σw² = 3N/8 exactly for the periodic window; N additions of numbers below one: N · 2^-53
  // relative.
  CHECK(window.sum() == Approx(120.0).epsilon(1e-13));
  CHECK(window.squaredNorm() == Approx(90.0).epsilon(1e-13));
  CHECK(noise_bandwidth_lines(window) == Approx(1.5).epsilon(1e-13));
  for (Eigen::Index n = 0; n < length / 4; ++n) {
    double sum = 0.0;
    for (Eigen::Index k = 0; k < 4; ++k) sum += window[n + k * length / 4] * window[n + k * length / 4];
    CHECK(sum == Approx(1.5).epsilon(1e-13));
  }
  CHECK_THROWS_AS(hann_window(1), Failure);
}

TEST_CASE("window correlation: known values for Hann and conjugate symmetry") {
  const Eigen::VectorXd window = hann_window(240);
  // Lines apart: transform of w² = 3/8 - cos/2 + cos 2/8, so -2/3, 1/6, 0. Half a window apart: 1/6.
  CHECK(std::abs(window_correlation(window, 0, 0) - 1.0) < 1e-13);
  CHECK(std::abs(window_correlation(window, 0, 1) + 2.0 / 3.0) < 1e-13);
  CHECK(std::abs(window_correlation(window, 0, -2) - 1.0 / 6.0) < 1e-13);
  CHECK(std::abs(window_correlation(window, 0, 3)) < 1e-13);
  CHECK(std::abs(window_correlation(window, 120, 0) - 1.0 / 6.0) < 1e-13);
  CHECK(std::abs(window_correlation(window, 240, 1)) < 1e-13);
  CHECK(std::abs(window_correlation(window, 60, 1) - std::conj(window_correlation(window, 60, -1))) < 1e-13);
}

TEST_CASE("noise correlation between segments and lines agrees with sampled white noise") {
  // 4000 records of seven segments. A sampled correlation has a standard error of at most 1/sqrt(4000) =
  // 0.016; 147 complex values are compared, each within 4.5 standard errors (probability of a miss exp(-4.5²)
  // = 2e-9).
  const int runs = 4000;
  const Eigen::Index length = 32, samples = 80;
  std::mt19937_64 random(11);
  std::normal_distribution<double> normal;
  std::vector<RecordSignals> records(1);
  const Eigen::Index line = 5;
  std::vector<Eigen::MatrixXcd> sums(3, Eigen::MatrixXcd::Zero(7, 7));
  SegmentSpectra spectra;
  for (int run = 0; run < runs; ++run) {
    records[0].output.resize(samples);
    for (double& value : records[0].output) value = normal(random);
    records[0].demand = records[0].output;
    spectra = cut_segments(records, length);
    REQUIRE(spectra.segments() == 7);
    for (int d = 0; d < 3; ++d) {
      sums[static_cast<std::size_t>(d)] += spectra.output.col(line) * spectra.output.col(line + d).adjoint();
    }
  }
  const NoiseCorrelation correlation(spectra);
  const double power = static_cast<double>(runs) * spectra.window.squaredNorm();
  for (int d = 0; d < 3; ++d) {
    for (Eigen::Index k = 0; k < 7; ++k) {
      for (Eigen::Index l = 0; l < 7; ++l) {
        const std::complex<double> sampled = sums[static_cast<std::size_t>(d)](k, l) / power;
        const Eigen::VectorXcd x = Eigen::VectorXcd::Unit(7, k), y = Eigen::VectorXcd::Unit(7, l);
        // Removing the record's mean takes 1/80 of the power out of line 0, next to nothing out of line 5.
        CHECK(std::abs(sampled - correlation.form(x, y, line, d)) < 4.5 * 0.016);
      }
    }
  }
}

TEST_CASE("real transform: a cosine on a line, and Parseval") {
  RealFft fft(12);
  Eigen::VectorXd x(12);
  for (Eigen::Index n = 0; n < 12; ++n)
    x[n] = std::cos(2.0 * M_PI * 2.0 * static_cast<double>(n) / 12.0 + 0.3);
  const Eigen::VectorXcd lines = fft.transform(x);
  CHECK(std::abs(lines[2] - std::polar(6.0, 0.3)) <
        1e-13);  // N/2 times the phasor; sums of 12 terms of size one
  const double power = 2.0 * lines.squaredNorm() - std::norm(lines[0]) - std::norm(lines[6]);
  CHECK(power == Approx(12.0 * x.squaredNorm()).epsilon(1e-13));
  CHECK_THROWS_AS(fft.transform(Eigen::VectorXd::Zero(11)), Failure);
  CHECK_THROWS_AS(RealFft(1), Failure);
}

}  // namespace
