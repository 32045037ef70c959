// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/signals/chirp.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <sstream>
#include <string>
#include <vector>

#include "tests/run_script.h"

namespace hoverwright::excitation {
namespace {

// Both sides round the phase, some 2000 rad at the end, to 2e-13 rad relative to an amplitude of one, in a
// handful of operations: 1e-12 expected, 1e-10 asked.
constexpr double kTolerance = 1e-10;
constexpr double kLow_hz = 0.3, kHigh_hz = 20.0, kSweep_s = 42.0, kRate_hz = 200.0;

std::vector<double> scipy_chirp(const std::string& method, double fade_s) {
  std::ostringstream command;
  command << tests::kPython << " " << HOVERWRIGHT_SOURCE_DIR << "/tests/external/signals/scipy_chirp.py "
          << method << " " << kLow_hz << " " << kHigh_hz << " " << kSweep_s << " " << kRate_hz << " "
          << fade_s;
  const tests::ScriptResult result = tests::run_script(command.str());
  INFO(result.output);
  REQUIRE(result.exit_code == 0);
  std::istringstream text(result.output);
  std::vector<double> values;
  for (double value = 0.0; text >> value;) values.push_back(value);
  REQUIRE(values.size() == 8401);
  return values;
}

}  // namespace

TEST_CASE("exponential chirp: its sweep is scipy.signal.chirp, method logarithmic", "[external]") {
  const std::vector<double> reference = scipy_chirp("logarithmic", 0.0);
  Chirp chirp;
  chirp.amplitude = 0.06;
  chirp.low_hz = kLow_hz;
  chirp.high_hz = kHigh_hz;
  chirp.hold_cycles = 3.0;
  const double hold_s = chirp.hold_cycles / kLow_hz;
  chirp.duration_s = hold_s + kSweep_s;
  double worst = 0.0;
  for (std::size_t k = 0; k < reference.size(); ++k) {
    // Not past the end, where hold_s + t may round beyond the duration and is rightly zero.
    const double t_s = std::min(hold_s + static_cast<double>(k) / kRate_hz, chirp.duration_s);
    worst = std::max(worst, std::abs(chirp.value(t_s) / chirp.amplitude - reference[k]));
  }
  CHECK(worst < kTolerance);
}

TEST_CASE("linear chirp: the same as scipy.signal.chirp, method linear", "[external]") {
  const std::vector<double> reference = scipy_chirp("linear", 0.0);
  const LinearChirp chirp{0.06, kLow_hz, kHigh_hz, kSweep_s, 0.0, 0.0};
  double worst = 0.0;
  for (std::size_t k = 0; k < reference.size(); ++k) {
    worst = std::max(
        worst, std::abs(chirp.value(static_cast<double>(k) / kRate_hz) / chirp.amplitude - reference[k]));
  }
  CHECK(worst < kTolerance);
}

TEST_CASE("chirp fades: the same as the tapers of scipy.signal.windows.tukey", "[external]") {
  const std::vector<double> reference = scipy_chirp("linear", 1.5);
  const LinearChirp chirp{0.06, kLow_hz, kHigh_hz, kSweep_s, 1.5, 1.5};
  double worst = 0.0;
  for (std::size_t k = 0; k < reference.size(); ++k) {
    worst = std::max(
        worst, std::abs(chirp.value(static_cast<double>(k) / kRate_hz) / chirp.amplitude - reference[k]));
  }
  CHECK(worst < kTolerance);
}

}  // namespace hoverwright::excitation
