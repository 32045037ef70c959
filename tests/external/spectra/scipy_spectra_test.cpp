// SPDX-License-Identifier: GPL-3.0-or-later
#include <catch2/catch.hpp>
#include <cmath>
#include <fstream>
#include <iomanip>
#include <random>
#include <sstream>

#include "ident/spectra/overlapped_windows.h"
#include "ident/spectra/window.h"
#include "tests/run_script.h"

namespace {

using namespace hoverwright;

TEST_CASE("window, spectra and coherence agree with scipy.signal", "[external]") {
  // Both compute the same sums with transforms that round at some 1e-16 · log2(N) of the signal's size: 1e-10
  // relative to the spectra (to sqrt(Sxx Syy) for the complex one) is asked for, even and odd lengths.
  const double rate_hz = 250.0;
  std::mt19937_64 random(17);
  std::normal_distribution<double> normal;
  Eigen::VectorXd x(5003), y(5003);
  double memory = 0.0;
  for (Eigen::Index n = 0; n < x.size(); ++n) {
    x[n] = normal(random) + 3.0;
    memory = 0.9 * memory + x[n];
    y[n] = memory + 0.5 * normal(random);
  }
  const tests::TemporaryFolder folder;
  const std::string file = (folder.path() / "signals.txt").string();
  {
    std::ofstream out(file);
    out << std::setprecision(17);
    for (Eigen::Index n = 0; n < x.size(); ++n) out << x[n] << ' ' << y[n] << '\n';
  }
  for (const Eigen::Index segment : {512, 375}) {
    INFO("segment " << segment);
    const tests::ScriptResult result = tests::run_script(
        tests::kPython + " " HOVERWRIGHT_SOURCE_DIR "/tests/external/spectra/scipy_spectra.py " + file + " " +
        std::to_string(segment) + " 250");
    INFO(result.output.substr(0, 500));
    REQUIRE(result.exit_code == 0);
    std::istringstream lines(result.output);
    const Eigen::VectorXd window = ident::hann_window(segment);
    for (Eigen::Index n = 0; n < segment; ++n) {
      double value = 0.0;
      REQUIRE(lines >> value);
      CHECK(std::abs(window[n] - value) < 1e-15);
    }
    const ident::CrossSpectra spectra = ident::cross_spectra(x, y, rate_hz, segment);
    REQUIRE(spectra.frequency_hz.size() == segment / 2 + 1);
    for (Eigen::Index m = 0; m < spectra.frequency_hz.size(); ++m) {
      double frequency = 0.0, xx = 0.0, yy = 0.0, real = 0.0, imaginary = 0.0, coherence = 0.0;
      REQUIRE(lines >> frequency >> xx >> yy >> real >> imaginary >> coherence);
      CHECK(std::abs(spectra.frequency_hz[m] - frequency) < 1e-10);
      CHECK(std::abs(spectra.xx[m] - xx) < 1e-10 * xx);
      CHECK(std::abs(spectra.yy[m] - yy) < 1e-10 * yy);
      CHECK(std::abs(spectra.xy[m] - std::complex<double>(real, imaginary)) < 1e-10 * std::sqrt(xx * yy));
      const double ours = std::norm(spectra.xy[m]) / (spectra.xx[m] * spectra.yy[m]);
      CHECK(std::abs(ours - coherence) < 1e-10);
    }
    double rest = 0.0;
    CHECK_FALSE(lines >> rest);
  }
}

}  // namespace
