// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/signals/chirp.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <functional>
#include <limits>
#include <numbers>
#include <vector>

#include "ident/failure.h"

namespace hoverwright::excitation {
namespace {

using std::numbers::pi;

Chirp plain_chirp() {
  Chirp chirp;
  chirp.amplitude = 0.05;
  chirp.low_hz = 0.4;
  chirp.high_hz = 16.0;
  chirp.duration_s = 30.0;
  chirp.hold_cycles = 2.0;
  return chirp;
}

Chirp faded_chirp() {
  Chirp chirp = plain_chirp();
  chirp.fade_in_s = 1.5;
  chirp.fade_out_s = 0.75;
  return chirp;
}

LinearChirp linear_chirp() {
  LinearChirp chirp;
  chirp.amplitude = 0.05;
  chirp.low_hz = 0.4;
  chirp.high_hz = 16.0;
  chirp.duration_s = 30.0;
  return chirp;
}

/// ∫ f dt over [from, to] by Simpson's rule: cycles that pass.
double cycles(const std::function<double(double)>& frequency_hz, double from, double to, int steps) {
  const double h = (to - from) / steps;
  double sum = frequency_hz(from) + frequency_hz(to);
  for (int k = 1; k < steps; ++k) sum += (k % 2 == 1 ? 4.0 : 2.0) * frequency_hz(from + h * k);
  return sum * h / 3.0;
}

/// The Failure that `chirp.check()` throws; its place must be `where`.
template <typename AnyChirp>
void require_refused(const AnyChirp& chirp, const std::string& where) {
  try {
    chirp.check();
  } catch (const ident::Failure& failure) {
    CHECK(failure.kind() == ident::FailureKind::bad_input);
    CHECK(failure.where() == where);
    return;
  }
  FAIL("not refused: " << where);
}

}  // namespace

TEST_CASE("chirp: the value is the sine of the integral of its frequency") {
  const Chirp chirp = plain_chirp();
  chirp.check();
  // Simpson on steps of 0.5 ms: the error is h⁴/180 · T · max of the fourth derivative, which is at most
  // f1 (ln(f1/f0)/T)⁴ = 16 (3.69/25)⁴ = 7.6e-3 1/s⁵: below 1e-16 cycles. The corner of f at the end of the
  // hold is on the grid. Rounding of the running sum of some 130 cycles leaves about 1e-12 rad. 1e-10 is a
  // hundred times that.
  const double hold_s = chirp.hold_cycles / chirp.low_hz;
  const auto frequency = [&](double t) { return chirp.frequency_hz(t); };
  for (const double t : {0.3, 2.0, 4.9, 5.0, 5.1, 9.0, 17.3, 25.01, 29.9}) {
    double passed = cycles(frequency, 0.0, std::min(t, hold_s), 1000);
    if (t > hold_s) passed += cycles(frequency, hold_s, t, 50000);
    CHECK(std::abs(chirp.value(t) - chirp.amplitude * std::sin(2.0 * pi * passed)) < 1e-10);
  }
}

TEST_CASE("linear chirp: the value is the sine of the integral of its frequency") {
  const LinearChirp chirp = linear_chirp();
  chirp.check();
  // Simpson is exact for a straight line; rounding as in the test above.
  const auto frequency = [&](double t) { return chirp.frequency_hz(t); };
  for (const double t : {0.3, 5.0, 17.3, 29.9}) {
    CHECK(std::abs(chirp.value(t) - chirp.amplitude * std::sin(2.0 * pi * cycles(frequency, 0.0, t, 100))) <
          1e-10);
  }
  CHECK(chirp.frequency_hz(0.0) == Approx(0.4).epsilon(1e-14));
  CHECK(chirp.frequency_hz(15.0) == Approx(8.2).epsilon(1e-14));
  CHECK(chirp.frequency_hz(30.0) == Approx(16.0).epsilon(1e-14));
}

TEST_CASE("chirp: frequency is held, then grows by equal ratios in equal times, up to the highest") {
  const Chirp chirp = plain_chirp();
  CHECK(chirp.frequency_hz(0.0) == 0.4);
  CHECK(chirp.frequency_hz(4.999) == 0.4);
  CHECK(chirp.frequency_hz(30.0) == Approx(16.0).epsilon(1e-12));
  for (double t = 5.0; t < 24.0; t += 1.7) {
    // 25 s of sweep cover a ratio of 40.
    CHECK(chirp.frequency_hz(t + 5.0) / chirp.frequency_hz(t) == Approx(std::pow(40.0, 0.2)).epsilon(1e-12));
  }
}

TEST_CASE("chirp: value and slope are continuous where the hold ends") {
  const Chirp chirp = plain_chirp();
  const double end = 5.0;
  const double h = 1e-4;
  // Both one-sided slopes differ from 2π f0 a by the curvature alone: the sine is at a zero crossing, so
  // second derivatives are a·2πf' <= 0.05·2π·0.06 = 0.02 and half of that times h is 1e-6.
  const double slope = chirp.amplitude * 2.0 * pi * chirp.low_hz;
  CHECK(std::abs((chirp.value(end) - chirp.value(end - h)) / h - slope) < 2e-6);
  CHECK(std::abs((chirp.value(end + h) - chirp.value(end)) / h - slope) < 2e-6);
  // sin(4π) in floating point is 5e-16.
  CHECK(std::abs(chirp.value(std::nextafter(end, 0.0))) < 1e-15);
  CHECK(std::abs(chirp.value(end)) < 1e-15);
}

TEST_CASE("chirp: fades are raised cosines, full amplitude between") {
  const Chirp faded = faded_chirp();
  const Chirp plain = plain_chirp();
  for (double t = 0.0; t <= 30.0; t += 0.01) {
    double weight = 1.0;
    if (t < 1.5) weight = std::pow(std::sin(0.5 * pi * t / 1.5), 2);
    if (t > 29.25) weight = std::pow(std::sin(0.5 * pi * (30.0 - t) / 0.75), 2);
    // The same square in another form: a few roundings of numbers below 1.
    CHECK(std::abs(faded.value(t) - weight * plain.value(t)) < 1e-15);
    CHECK(std::abs(faded.value(t)) <= faded.amplitude);
  }
  CHECK(faded.value(0.0) == 0.0);
  CHECK(faded.value(30.0) == 0.0);
  LinearChirp linear = linear_chirp();
  const LinearChirp bare = linear_chirp();
  linear.fade_in_s = 2.0;
  linear.fade_out_s = 3.0;
  CHECK(linear.value(1.0) == Approx(0.5 * bare.value(1.0)).epsilon(1e-14));
  CHECK(linear.value(28.5) == Approx(0.5 * bare.value(28.5)).epsilon(1e-14));
  CHECK(linear.value(20.0) == bare.value(20.0));
}

TEST_CASE("chirp: zero outside its duration") {
  for (const double t : {-1e-9, -5.0, 30.0 + 1e-9, 1e3}) {
    CHECK(plain_chirp().value(t) == 0.0);
    CHECK(plain_chirp().frequency_hz(t) == 0.0);
    CHECK(linear_chirp().value(t) == 0.0);
    CHECK(linear_chirp().frequency_hz(t) == 0.0);
  }
}

TEST_CASE("chirp: impossible values are refused and the member is named") {
  const double nan = std::numeric_limits<double>::quiet_NaN();
  const double infinite = std::numeric_limits<double>::infinity();
  const auto with = [](double Chirp::*member, double value) {
    Chirp chirp = faded_chirp();
    chirp.*member = value;
    return chirp;
  };
  CHECK_NOTHROW(faded_chirp().check());
  for (const double bad : {0.0, -1.0, nan, infinite}) {
    require_refused(with(&Chirp::amplitude, bad), "amplitude");
    require_refused(with(&Chirp::low_hz, bad), "low_hz");
    require_refused(with(&Chirp::high_hz, bad), "high_hz");
    require_refused(with(&Chirp::duration_s, bad), "duration_s");
    require_refused(with(&Chirp::hold_cycles, bad), "hold_cycles");
  }
  for (const double bad : {-1.0, nan, infinite}) {
    require_refused(with(&Chirp::fade_in_s, bad), "fade_in_s");
    require_refused(with(&Chirp::fade_out_s, bad), "fade_out_s");
  }
  require_refused(with(&Chirp::high_hz, 0.4), "high_hz");
  require_refused(with(&Chirp::hold_cycles, 1.5), "hold_cycles");
  // Two cycles of 0.4 Hz and the fades take 5 + 1.5 + 0.75 s.
  require_refused(with(&Chirp::duration_s, 7.25), "duration_s");
  CHECK_NOTHROW(with(&Chirp::duration_s, 7.26).check());
}

TEST_CASE("linear chirp: impossible values are refused and the member is named") {
  const auto with = [](double LinearChirp::*member, double value) {
    LinearChirp chirp = linear_chirp();
    chirp.*member = value;
    return chirp;
  };
  CHECK_NOTHROW(linear_chirp().check());
  require_refused(with(&LinearChirp::amplitude, 0.0), "amplitude");
  require_refused(with(&LinearChirp::low_hz, -0.4), "low_hz");
  require_refused(with(&LinearChirp::high_hz, 0.3), "high_hz");
  require_refused(with(&LinearChirp::duration_s, 0.0), "duration_s");
  require_refused(with(&LinearChirp::fade_in_s, 30.0), "duration_s");
  require_refused(with(&LinearChirp::fade_out_s, -1.0), "fade_out_s");
}

}  // namespace hoverwright::excitation
