// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/turbulence.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <vector>

#include "ident/failure.h"

using namespace hoverwright;
using excitation::Air;
using excitation::Wind;
using std::numbers::pi;

namespace {

constexpr double kSpan = 0.65;

/// Wind from north: gust axes are then north, east, down.
ident::Weather harbour() {
  ident::Weather weather;
  weather.wind_m_s = 5.0;
  weather.turbulence_wind_m_s = 7.0;
  weather.height_m = 10.0;
  return weather;
}

/// Mean of squares and mean of products at a lag.
struct Signal {
  std::vector<double> x;
  [[nodiscard]] double covariance(std::size_t lag) const {
    double sum = 0.0;
    for (std::size_t k = lag; k < x.size(); ++k) sum += x[k] * x[k - lag];
    return sum / static_cast<double>(x.size() - lag);
  }
};

/// ∫ |s/(V(1 + T s))|² Φ_transverse dω, the variance of q or r by the spectrum (trapezoids in log ω: smooth,
/// decays at both ends).
double slope_variance(double sigma, double length_m, double speed, double lag_s) {
  const double time = length_m / speed;
  double sum = 0.0;
  const int steps = 20000;
  const double from = std::log(1e-5), to = std::log(1e6), h = (to - from) / steps;
  for (int i = 0; i <= steps; ++i) {
    const double w = std::exp(from + h * i);
    const double phi = sigma * sigma * time / pi * (1.0 + 3.0 * time * time * w * w) /
                       std::pow(1.0 + time * time * w * w, 2);
    sum += w * w / (speed * speed) / (1.0 + lag_s * lag_s * w * w) * phi * w * h;
  }
  return sum;
}

}  // namespace

TEST_CASE("turbulence: scales at 10 m by the low-altitude formulas") {
  // h = 32.808 ft: 0.177 + 0.000823 h = 0.204001; ^0.4 = 0.529484, ^1.2 = 0.148443 (six digits).
  const excitation::DrydenScales scales = excitation::dryden_scales(harbour());
  CHECK(scales.sigma_w_m_s == Approx(0.7));
  CHECK(scales.sigma_u_m_s == Approx(0.7 / 0.529484).epsilon(1e-5));
  CHECK(scales.sigma_v_m_s == scales.sigma_u_m_s);
  CHECK(scales.length_w_m == Approx(10.0));
  CHECK(scales.length_u_m == Approx(10.0 / 0.148443).epsilon(1e-5));
  CHECK(scales.length_v_m == scales.length_u_m);
}

TEST_CASE("turbulence: variances and correlations over a long flight are those of the spectra") {
  // 10 Hz for 2e5 s; the filters are exact at any rate. The relative standard error of a variance is sqrt(2
  // τ/T) for first-order noise of time constant τ: u and v (13.5 s) 1.2 %, w (2 s) 0.5 %, p, q, r (0.17 s)
  // 0.2 %. Four of them are allowed.
  const ident::Weather weather = harbour();
  const excitation::DrydenScales scales = excitation::dryden_scales(weather);
  Wind wind(weather, true, kSpan, 10.0, 42);
  const std::size_t samples = 2000000;
  Signal u, v, w, p, q, r;
  for (Signal* s : {&u, &v, &w, &p, &q, &r}) s->x.reserve(samples);
  double q_with_falling_w = 0.0, r_with_rising_v = 0.0;
  for (std::size_t k = 0; k < samples; ++k) {
    const Air air = wind.next();
    u.x.push_back(air.velocity_m_s.x() + weather.wind_m_s);
    v.x.push_back(air.velocity_m_s.y());
    w.x.push_back(air.velocity_m_s.z());
    p.x.push_back(air.rotation_rad_s.x());
    q.x.push_back(air.rotation_rad_s.y());
    r.x.push_back(air.rotation_rad_s.z());
    if (k > 0) {
      q_with_falling_w += q.x[k] * (w.x[k - 1] - w.x[k]);
      r_with_rising_v += r.x[k] * (v.x[k] - v.x[k - 1]);
    }
  }
  const double su2 = scales.sigma_u_m_s * scales.sigma_u_m_s, sw2 = scales.sigma_w_m_s * scales.sigma_w_m_s;
  CHECK(u.covariance(0) == Approx(su2).epsilon(0.048));
  CHECK(v.covariance(0) == Approx(su2).epsilon(0.048));
  CHECK(w.covariance(0) == Approx(sw2).epsilon(0.02));
  CHECK(p.covariance(0) == Approx(std::pow(excitation::dryden_sigma_p(scales, kSpan), 2)).epsilon(0.012));
  const double lag_q = 4.0 * kSpan / (pi * 5.0), lag_r = 3.0 * kSpan / (pi * 5.0);
  CHECK(q.covariance(0) ==
        Approx(slope_variance(scales.sigma_w_m_s, scales.length_w_m, 5.0, lag_q)).epsilon(0.02));
  CHECK(r.covariance(0) ==
        Approx(slope_variance(scales.sigma_v_m_s, scales.length_v_m, 5.0, lag_r)).epsilon(0.02));

  // Longitudinal and transverse correlation of the Dryden field: exp(-x/L) and (1 - x/2L) exp(-x/L), x = V
  // times the lag.
  for (const double lag_s : {0.5, 2.0, 8.0}) {
    const auto lag = static_cast<std::size_t>(10.0 * lag_s);
    const double xu = 5.0 * lag_s / scales.length_u_m, xw = 5.0 * lag_s / scales.length_w_m;
    CHECK(std::abs(u.covariance(lag) / su2 - std::exp(-xu)) < 0.048);
    CHECK(std::abs(w.covariance(lag) / sw2 - (1.0 - xw / 2.0) * std::exp(-xw)) < 0.02);
  }
  // The vehicle meets the field with +x: rising v turns the air to the right, rising (downward) w lowers the
  // nose of the field.
  CHECK(q_with_falling_w > 0.0);
  CHECK(r_with_rising_v > 0.0);
}

TEST_CASE("turbulence: rolling gusts integrate to the stated variance") {
  // ∫ Φ_p dω over the spectrum of the header, trapezoids in log ω.
  const excitation::DrydenScales scales = excitation::dryden_scales(harbour());
  const double speed = 5.0;
  double sum = 0.0;
  const int steps = 20000;
  const double from = std::log(1e-6), to = std::log(1e7), h = (to - from) / steps;
  for (int i = 0; i <= steps; ++i) {
    const double w = std::exp(from + h * i);
    const double corner = 4.0 * kSpan * w / (pi * speed);
    sum += 0.8 / speed * std::cbrt(pi / (4.0 * kSpan)) * std::pow(scales.length_w_m, -2.0 / 3.0) /
           (1.0 + corner * corner) * w * h;
  }
  const double variance = scales.sigma_w_m_s * scales.sigma_w_m_s * sum;
  // The cut at 1e7 rad/s loses 2e-8; at 1e-6 rad/s 1e-7.
  CHECK(std::pow(excitation::dryden_sigma_p(scales, kSpan), 2) == Approx(variance).epsilon(1e-6));
}

TEST_CASE("turbulence: it is as strong in the first sample as later") {
  // 4000 seeds: relative standard error of a variance sqrt(2/4000) = 2.2 %; four of them.
  const ident::Weather weather = harbour();
  const excitation::DrydenScales scales = excitation::dryden_scales(weather);
  double u2 = 0.0, v2 = 0.0, w2 = 0.0, p2 = 0.0, q2 = 0.0;
  const int seeds = 4000;
  for (int seed = 0; seed < seeds; ++seed) {
    const Air air = Wind(weather, true, kSpan, 400.0, static_cast<std::uint64_t>(seed)).next();
    u2 += std::pow(air.velocity_m_s.x() + weather.wind_m_s, 2) / seeds;
    v2 += std::pow(air.velocity_m_s.y(), 2) / seeds;
    w2 += std::pow(air.velocity_m_s.z(), 2) / seeds;
    p2 += std::pow(air.rotation_rad_s.x(), 2) / seeds;
    q2 += std::pow(air.rotation_rad_s.y(), 2) / seeds;
  }
  CHECK(std::sqrt(u2) == Approx(scales.sigma_u_m_s).epsilon(0.045));
  CHECK(std::sqrt(v2) == Approx(scales.sigma_v_m_s).epsilon(0.045));
  CHECK(std::sqrt(w2) == Approx(scales.sigma_w_m_s).epsilon(0.045));
  CHECK(std::sqrt(p2) == Approx(excitation::dryden_sigma_p(scales, kSpan)).epsilon(0.045));
  const double lag_q = 4.0 * kSpan / (pi * 5.0);
  CHECK(q2 == Approx(slope_variance(scales.sigma_w_m_s, scales.length_w_m, 5.0, lag_q)).epsilon(0.09));
}

TEST_CASE("wind: it blows from where the file says, and gusts turn with it") {
  ident::Weather weather;
  weather.wind_m_s = 4.0;
  weather.wind_from_deg = 90.0;
  Air air = Wind(weather, true, kSpan, 400.0, 1).next();
  CHECK(air.velocity_m_s.x() == Approx(0.0).margin(1e-15));
  CHECK(air.velocity_m_s.y() == Approx(-4.0));  // from the east, so westward
  CHECK(air.rotation_rad_s.norm() == 0.0);

  // Same seed, wind turned by 90°: the gust vector is the same one, turned.
  weather.turbulence_wind_m_s = 7.0;
  ident::Weather north = weather;
  north.wind_from_deg = 0.0;
  Wind a(north, true, kSpan, 400.0, 5), b(weather, true, kSpan, 400.0, 5);
  for (int k = 0; k < 100; ++k) {
    const Air from_north = a.next(), from_east = b.next();
    CHECK(from_east.velocity_m_s.y() == Approx(from_north.velocity_m_s.x()));
    CHECK(from_east.velocity_m_s.x() == Approx(-from_north.velocity_m_s.y()));
    CHECK(from_east.velocity_m_s.z() == Approx(from_north.velocity_m_s.z()));
  }
}

TEST_CASE("wind: switching turbulence off leaves the steady wind") {
  Wind calm(harbour(), false, kSpan, 400.0, 1);
  for (int k = 0; k < 10; ++k)
    CHECK((calm.next().velocity_m_s - Eigen::Vector3d(-5.0, 0.0, 0.0)).norm() < 1e-15);
}

TEST_CASE("turbulence: a height outside the formulas is refused") {
  ident::Weather weather = harbour();
  for (const double height : {1.0, 400.0}) {
    weather.height_m = height;
    CHECK_THROWS_AS(excitation::dryden_scales(weather), ident::Failure);
    CHECK_NOTHROW(Wind(weather, false, kSpan, 400.0, 1));
  }
}

TEST_CASE("noise: streams of one seed are independent, standard normal, and repeat") {
  using excitation::NoiseSource;
  using excitation::NormalStream;
  NormalStream a(7, NoiseSource::gyro), again(7, NoiseSource::gyro), b(7, NoiseSource::attitude),
      c(8, NoiseSource::gyro);
  const int count = 200000;
  double sum = 0.0, squares = 0.0, fourth = 0.0, with_b = 0.0, with_c = 0.0;
  bool same = true;
  for (int i = 0; i < count; ++i) {
    const double x = a.next();
    same = same && x == again.next();
    sum += x / count;
    squares += x * x / count;
    fourth += x * x * x * x / count;
    with_b += x * b.next() / count;
    with_c += x * c.next() / count;
  }
  CHECK(same);
  // Standard errors: 1/sqrt(N) = 0.0022 of a mean or a product, sqrt(2/N) = 0.0032 of the variance,
  // sqrt(96/N) = 0.022 of the fourth moment; four of them.
  CHECK(std::abs(sum) < 0.009);
  CHECK(std::abs(with_b) < 0.009);
  CHECK(std::abs(with_c) < 0.009);
  CHECK(std::abs(squares - 1.0) < 0.013);
  CHECK(std::abs(fourth - 3.0) < 0.088);
}
