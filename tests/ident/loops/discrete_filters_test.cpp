// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/discrete_filters.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <complex>
#include <functional>
#include <limits>
#include <numbers>

#include "ident/failure.h"

using namespace hoverwright::ident;
using std::numbers::pi;

namespace {

constexpr double kRate = 400.0;

/// Σ h[k] exp(-jωkΔ) of what `step` answers to a unit impulse.
std::complex<double> transform_of_impulse(const std::function<double(double)>& step, double frequency_hz,
                                          int samples) {
  std::complex<double> sum = 0.0;
  for (int k = 0; k < samples; ++k) {
    sum += step(k == 0 ? 1.0 : 0.0) * std::polar(1.0, -2.0 * pi * frequency_hz * k / kRate);
  }
  return sum;
}

}  // namespace

TEST_CASE("low-pass: the difference equation has the response it states") {
  for (const double cutoff : {15.0, 80.0, 190.0}) {
    for (const double f : {0.0, 3.0, 40.0, 80.0, 150.0, 199.0}) {
      LowPass2 filter(cutoff, kRate);
      // The impulse response has fallen below epsilon after 2000 samples: at 15 Hz the poles have radius
      // 0.85.
      const auto measured = transform_of_impulse([&](double x) { return filter.step(x); }, f, 2000);
      CHECK(std::abs(measured - filter.response(f)) < 1e-12);  // 2000 additions of rounding 1e-16
    }
  }
}

TEST_CASE("low-pass: Butterworth gain, unity at rest and -3 dB at the cutoff") {
  const LowPass2 filter(80.0, kRate);
  CHECK(std::abs(filter.response(0.0)) == Approx(1.0).epsilon(1e-13));
  CHECK(std::abs(filter.response(80.0)) == Approx(std::numbers::sqrt2 / 2.0).epsilon(1e-13));
  CHECK(std::arg(filter.response(80.0)) == Approx(-pi / 2.0).epsilon(1e-12));
  // |H|² = 1/(1 + (w/wc)⁴) in the bilinear transform's warped frequency tan(πf/rate).
  const double ratio = std::tan(pi * 30.0 / kRate) / std::tan(pi * 80.0 / kRate);
  CHECK(std::norm(filter.response(30.0)) == Approx(1.0 / (1.0 + std::pow(ratio, 4))).epsilon(1e-12));
}

TEST_CASE("low-pass: reset stands as if the input had always been there") {
  LowPass2 filter(20.0, kRate);
  filter.reset(-3.5);
  for (int k = 0; k < 50; ++k) CHECK(filter.step(-3.5) == Approx(-3.5).epsilon(1e-13));
}

TEST_CASE("low-pass: a cutoff outside (0, rate/2) is refused") {
  CHECK_THROWS_AS(LowPass2(0.0, kRate), Failure);
  CHECK_THROWS_AS(LowPass2(-5.0, kRate), Failure);
  CHECK_THROWS_AS(LowPass2(200.0, kRate), Failure);
  CHECK_THROWS_AS(LowPass2(std::numeric_limits<double>::quiet_NaN(), kRate), Failure);
}

TEST_CASE("PID: a driven sine comes out with the response it states") {
  LoopGains gains;
  gains.kp = 0.7;
  gains.ki = 2.0;
  gains.kd = 0.03;
  gains.derivative_cutoff_hz = 40.0;
  for (const double f : {0.5, 4.0, 25.0, 100.0}) {
    // Both inputs are periodic in 800 samples (0.5 Hz grid). An integrator keeps the mean it had at
    // switch-on, which is orthogonal to the line; the derivative's transient (radius exp(-0.63)) is gone
    // after the first 800 samples.
    Pid pid(gains, kRate);
    std::complex<double> set_point_line = 0.0, measurement_line = 0.0;
    Pid of_measurement(gains, kRate);
    for (int k = 0; k < 1600; ++k) {
      const double angle = 2.0 * pi * f * k / kRate;
      const double from_set_point = pid.step(std::cos(angle), 0.0);
      const double from_measurement = of_measurement.step(0.0, std::cos(angle));
      if (k < 800) continue;
      set_point_line += from_set_point * std::polar(2.0 / 800.0, -angle);
      measurement_line += from_measurement * std::polar(2.0 / 800.0, -angle);
    }
    CHECK(std::abs(set_point_line - pid.error_response(f)) < 1e-11 * (1.0 + std::abs(pid.error_response(f))));
    const auto through_both = -(pid.error_response(f) + pid.derivative_response(f));
    CHECK(std::abs(measurement_line - through_both) < 1e-11 * (1.0 + std::abs(through_both)));
  }
}

TEST_CASE("PID: first samples follow the difference equation of the header") {
  LoopGains gains;
  gains.kp = 2.0;
  gains.ki = 40.0;
  gains.kd = 0.5;
  gains.derivative_cutoff_hz = 10.0;
  Pid pid(gains, kRate);
  pid.reset(1.0, 0.25);
  const double alpha = std::exp(-2.0 * pi * 10.0 / kRate);
  const double d0 = (1.0 - alpha) * (1.1 - 1.0) * kRate;
  CHECK(pid.step(3.0, 1.1) == Approx(2.0 * 1.9 + 0.25 - 0.5 * d0));
  const double integral = 0.25 + 40.0 / kRate * 1.9;
  const double d1 = alpha * d0 + (1.0 - alpha) * (1.2 - 1.1) * kRate;
  CHECK(pid.step(3.0, 1.2) == Approx(2.0 * 1.8 + integral - 0.5 * d1));
}

TEST_CASE("PID: the integral is held at the limit and lets go at once") {
  LoopGains gains;
  gains.kp = 1.0;
  gains.ki = 10.0;
  gains.limit = 0.5;
  Pid pid(gains, kRate);
  for (int k = 0; k < 4000; ++k) CHECK(std::abs(pid.step(2.0, 0.0)) <= 0.5);
  // Nothing was wound up while limited, so an error of the other sign is answered by kp at the first sample.
  CHECK(pid.step(-0.2, 0.0) == Approx(-0.2));
  // Without a limit the same error winds up 10 s of ki e.
  gains.limit.reset();
  Pid open(gains, kRate);
  for (int k = 0; k < 4000; ++k) open.step(2.0, 0.0);
  CHECK(open.step(-0.2, 0.0) == Approx(200.0 - 0.2));
}

TEST_CASE("PID: a pure gain answers at zero frequency, an integrator does not pretend to be finite there") {
  LoopGains gains;
  gains.kp = 3.0;
  CHECK(Pid(gains, kRate).error_response(0.0) == std::complex<double>(3.0, 0.0));
  gains.ki = 1.0;
  CHECK_FALSE(std::isfinite(std::abs(Pid(gains, kRate).error_response(0.0))));
}

TEST_CASE("PID: gains that cannot run are refused") {
  LoopGains gains;
  gains.kd = 0.1;
  CHECK_THROWS_AS(Pid(gains, kRate), Failure);
  gains.derivative_cutoff_hz = -3.0;
  CHECK_THROWS_AS(Pid(gains, kRate), Failure);
  gains.derivative_cutoff_hz = 30.0;
  CHECK_NOTHROW(Pid(gains, kRate));
  CHECK_THROWS_AS(Pid(gains, 0.0), Failure);
  gains.limit = 0.0;
  CHECK_THROWS_AS(Pid(gains, kRate), Failure);
}
