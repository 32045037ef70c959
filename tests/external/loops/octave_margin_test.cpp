// SPDX-License-Identifier: GPL-3.0-or-later
#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>
#include <complex>
#include <fstream>
#include <numbers>
#include <random>
#include <sstream>
#include <string>
#include <vector>

#include "ident/loops/margins.h"
#include "tests/run_script.h"

using namespace hoverwright::ident;
using std::numbers::pi;
using Complex = std::complex<double>;

namespace {

using Polynomial = std::vector<double>;  // highest power first

Polynomial product(const Polynomial& a, const Polynomial& b) {
  Polynomial c(a.size() + b.size() - 1, 0.0);
  for (std::size_t i = 0; i < a.size(); ++i) {
    for (std::size_t j = 0; j < b.size(); ++j) c[i + j] += a[i] * b[j];
  }
  return c;
}

struct TestLoop {
  double interval_s = 0.0;  // 0: continuous
  Polynomial numerator, denominator;

  [[nodiscard]] Complex response(double omega) const {
    const Complex x = interval_s > 0.0 ? std::polar(1.0, omega * interval_s) : Complex(0.0, omega);
    const auto value = [&](const Polynomial& p) {
      Complex sum = 0.0;
      for (const double c : p) sum = sum * x + c;
      return sum;
    };
    return value(numerator) / value(denominator);
  }
};

/// Twelve of each kind: plain lags, integrator with lags, conditionally stable, resonant twice, and sampled
/// integrator with lag and whole samples of delay.
std::vector<TestLoop> random_loops() {
  std::mt19937_64 random(17);
  std::uniform_real_distribution<double> uniform(0.0, 1.0);
  const auto spread = [&](double middle, double factor) {
    return middle * std::pow(factor, 2.0 * uniform(random) - 1.0);
  };
  std::vector<TestLoop> loops;
  for (int i = 0; i < 12; ++i) {
    const Polynomial lags =
        product(product({1.0, spread(1.0, 3.0)}, {1.0, spread(4.0, 3.0)}), {1.0, spread(10.0, 3.0)});
    loops.push_back({0.0, {lags.back() * spread(10.0, 4.0)}, lags});
    loops.push_back({0.0,
                     {spread(6.0, 6.0)},
                     product(product({1.0, 0.0}, {1.0, spread(3.0, 2.0)}), {1.0, spread(8.0, 2.0)})});
    const Polynomial lead{1.0, spread(1.0, 2.0)};
    const double gain = spread(40.0, 4.0);
    Polynomial numerator = product(lead, lead);
    for (double& c : numerator) c *= gain;
    loops.push_back({0.0, numerator, product({1.0, 0.0, 0.0, 0.0}, {1.0, spread(30.0, 2.0)})});
    // Resonant: behind an integrator (often unstable), and by itself, gain below one at rest: |L| = 1 going
    // up and coming down.
    const double natural = spread(10.0, 1.5);
    const Polynomial resonance{1.0, spread(0.1, 2.0) * natural, natural * natural};
    loops.push_back({0.0, {spread(1.0, 1.5) * natural * natural}, product({1.0, 0.0}, resonance)});
    loops.push_back({0.0, {spread(0.5, 1.8) * natural * natural}, resonance});
    const double interval = 0.0025, decay = std::exp(-interval * spread(20.0, 2.0));
    Polynomial delayed = product({1.0, -1.0}, {1.0, -decay});
    delayed.resize(delayed.size() + static_cast<std::size_t>(1 + i % 4), 0.0);  // z^-1 .. z^-4 more
    loops.push_back({interval, {(1.0 - decay) * interval * spread(12.0, 4.0)}, delayed});
  }
  return loops;
}

struct Reference {
  double gain = 0.0, phase_deg = 0.0, gain_rad_s = 0.0, phase_rad_s = 0.0, peak = 0.0;
  bool stable = false;
};

std::vector<Reference> by_octave(const std::vector<TestLoop>& loops) {
  const hoverwright::tests::TemporaryFolder folder;
  const auto path = folder.path() / "loops.txt";
  std::ofstream file(path);
  file.precision(17);
  for (const TestLoop& loop : loops) {
    file << loop.interval_s;
    for (const Polynomial& p : {loop.numerator, loop.denominator}) {
      file << ' ' << p.size();
      for (const double c : p) file << ' ' << c;
    }
    file << '\n';
  }
  file.close();
  // Octave prints a harmless complaint on its way out to standard error, which is dropped.
  const auto result = hoverwright::tests::run_script("(octave --no-gui --quiet " HOVERWRIGHT_SOURCE_DIR
                                                     "/tests/external/loops/octave_margin.m " +
                                                     path.string() + " 2>/dev/null)");
  INFO(result.output);
  std::vector<Reference> references;
  std::istringstream lines(result.output);
  std::string word[6];
  while (lines >> word[0] >> word[1] >> word[2] >> word[3] >> word[4] >> word[5]) {
    const auto number = [&](int i) {
      return std::strtod(word[i].c_str(), nullptr);
    };  // reads Inf and NaN too
    references.push_back({number(0), number(1), number(2), number(3), number(5), number(4) != 0.0});
  }
  REQUIRE(references.size() == loops.size());
  return references;
}

}  // namespace

// Octave's conventions: the gain margin is a ratio, the smallest above one, or if there is none the largest
// below one (a reduction); the phase margin is 180° + phase in (0°, 360°], so one of 350° is our -10°, and
// the smallest of these over all crossings is given.
TEST_CASE("margins agree with Octave's margin() and norm() [external]", "[external]") {
  const std::vector<TestLoop> loops = random_loops();
  const std::vector<Reference> references = by_octave(loops);
  REQUIRE(loops.size() >= 40);
  int gain_margins = 0, reductions = 0, phases = 0, several = 0, peaks = 0, unstable = 0;
  double worst_db = 0.0, worst_deg = 0.0, worst_peak = 0.0;
  for (std::size_t i = 0; i < loops.size(); ++i) {
    INFO("loop " << i);
    const double high = loops[i].interval_s > 0.0 ? 0.9999 * pi / loops[i].interval_s : 1e4, low = 1e-3;
    const int points = 60000;
    Eigen::VectorXd f(points);
    Eigen::VectorXcd samples(points);
    int crossings = 0;
    for (int k = 0; k < points; ++k) {
      const double omega = low * std::pow(high / low, k / (points - 1.0));
      f[k] = omega / (2.0 * pi);
      samples[k] = loops[i].response(omega);
      if (k > 0) crossings += (std::abs(samples[k]) < 1.0) != (std::abs(samples[k - 1]) < 1.0) ? 1 : 0;
    }
    const Reference& r = references[i];
    const Margins m = read_margins(f, samples, r.stable);
    unstable += r.stable ? 0 : 1;
    // Step in ln ω 2.7e-4; with curvature up to 4Q² = 400 the interpolation errs by 400 h²/8 = 4e-6: 4e-5 dB,
    // 2e-4 degrees. Octave finds its crossings as polynomial roots, tolerance sqrt(epsilon).
    if (std::isfinite(r.gain)) {
      const double db = 20.0 * std::log10(r.gain);
      const auto& ours = db >= 0.0 ? m.gain_margin_db : m.gain_reduction_db;
      (db >= 0.0 ? gain_margins : reductions) += 1;
      REQUIRE(ours);
      CHECK(*ours == Approx(std::abs(db)).margin(2e-4));
      worst_db = std::max(worst_db, std::abs(*ours - std::abs(db)));
      if (db >= 0.0) CHECK(*m.phase_crossover_hz == Approx(r.gain_rad_s / (2.0 * pi)).epsilon(1e-5));
    } else {
      CHECK_FALSE(m.gain_margin_db);
      CHECK_FALSE(m.gain_reduction_db);
    }
    if (std::isfinite(r.phase_rad_s)) {
      REQUIRE(m.phase_margin_deg);
      double folded = r.phase_deg > 180.0 ? r.phase_deg - 360.0 : r.phase_deg;
      if (r.stable) folded = std::abs(folded);
      if (crossings == 1) {
        ++phases;
        CHECK(*m.phase_margin_deg == Approx(folded).margin(1e-3));
        CHECK(*m.crossover_hz == Approx(r.phase_rad_s / (2.0 * pi)).epsilon(1e-5));
        worst_deg = std::max(worst_deg, std::abs(*m.phase_margin_deg - folded));
      } else if (r.stable && r.phase_deg <= 180.0) {
        ++several;  // a lag to the border at every crossing: the smallest is the same
        CHECK(*m.phase_margin_deg == Approx(folded).margin(1e-3));
      } else {
        CHECK(*m.phase_margin_deg <= folded + 1e-3);  // ours looks at leads and signs too
      }
    } else {
      CHECK_FALSE(m.phase_margin_deg);
    }
    if (r.stable) {
      ++peaks;
      // Octave's norm is asked for 1e-7; ours follows a parabola between grid points, which leaves higher
      // orders of h times the sharpness of the peak: 1e-5 covers peaks up to 300.
      CHECK(m.sensitivity_peak == Approx(r.peak).epsilon(1e-5));
      worst_peak = std::max(worst_peak, std::abs(m.sensitivity_peak / r.peak - 1.0));
    }
  }
  std::ostringstream summary;
  summary << loops.size() << " loops, " << unstable << " unstable: " << gain_margins << " gain margins, "
          << reductions << " reductions within " << worst_db << " dB, " << phases << " single and " << several
          << " multiple phase margins within " << worst_deg << " degrees, " << peaks << " peaks within "
          << worst_peak;
  INFO(summary.str());
  CHECK(gain_margins >= 20);
  CHECK(reductions >= 5);
  CHECK(phases >= 20);
  CHECK(several >= 3);
  CHECK(unstable >= 5);
}
