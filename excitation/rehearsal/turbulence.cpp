// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/turbulence.h"

#include <fmt/format.h>

#include <Eigen/Cholesky>
#include <algorithm>
#include <cmath>
#include <numbers>
#include <utility>

#include "ident/failure.h"

namespace hoverwright::excitation {

namespace {

using std::numbers::pi;

constexpr double kFoot = 0.3048;
constexpr double kSqrt3 = std::numbers::sqrt3;

/// Σ terms of a Taylor series until they no longer change the sum; `advance` turns term k into term k + 1.
template <class Advance>
Eigen::Matrix3d taylor_sum(Eigen::Matrix3d term, Advance advance) {
  Eigen::Matrix3d sum = term;
  for (int k = 1; k < 200; ++k) {
    term = advance(term, k);
    const Eigen::Matrix3d before = sum;
    sum += term;
    if (sum == before) return sum;
  }
  throw ident::Failure(ident::FailureKind::internal_error, "the gust filters cannot be sampled at this rate",
                       "", "");
}

/// States of v (or w) and of its slope: x1 = n/(1+Ts), x2 = x1/(1+Ts), x3 = v/(1+T_slope s), v = √3 x1 +
/// (1-√3) x2, scaled so that var v = σ² for unit white noise.
std::pair<Eigen::Matrix3d, Eigen::Vector3d> cross_gust_system(double sigma, double time_s,
                                                              double slope_time_s) {
  Eigen::Matrix3d a = Eigen::Matrix3d::Zero();
  a(0, 0) = -1.0 / time_s;
  a(1, 0) = 1.0 / time_s;
  a(1, 1) = -1.0 / time_s;
  a(2, 0) = kSqrt3 / slope_time_s;
  a(2, 1) = (1.0 - kSqrt3) / slope_time_s;
  a(2, 2) = -1.0 / slope_time_s;
  return {a, Eigen::Vector3d(sigma / std::sqrt(time_s), 0.0, 0.0)};
}

double gust_of(const Eigen::Vector3d& x) {
  return kSqrt3 * x(0) + (1.0 - kSqrt3) * x(1);
}

}  // namespace

DrydenScales dryden_scales(const ident::Weather& weather) {
  const double height_ft = weather.height_m / kFoot;
  if (!(height_ft >= 10.0 && height_ft <= 1000.0)) {
    throw ident::Failure(ident::FailureKind::bad_input,
                         fmt::format("low-altitude turbulence is defined from 3.05 m to 304.8 m, not at {} m",
                                     weather.height_m),
                         "/airframe/weather/height_m", "set the height of the flight within these bounds");
  }
  const double shear = 0.177 + 0.000823 * height_ft;
  DrydenScales scales;
  scales.sigma_w_m_s = 0.1 * weather.turbulence_wind_m_s;
  scales.sigma_u_m_s = scales.sigma_v_m_s = scales.sigma_w_m_s / std::pow(shear, 0.4);
  scales.length_w_m = weather.height_m;
  scales.length_u_m = scales.length_v_m = weather.height_m / std::pow(shear, 1.2);
  return scales;
}

double dryden_sigma_p(const DrydenScales& scales, double span_m) {
  const double variance_per_w = 0.8 * pi * pi / (8.0 * span_m) * std::cbrt(pi / (4.0 * span_m)) /
                                std::pow(scales.length_w_m, 2.0 / 3.0);
  return scales.sigma_w_m_s * std::sqrt(variance_per_w);
}

ShapedNoise::ShapedNoise(const Eigen::Matrix3d& a, const Eigen::Vector3d& b, double interval_s,
                         NormalStream normal)
    : normal_(std::move(normal)) {
  transition_ = taylor_sum(
      Eigen::Matrix3d::Identity(),
      [&](const Eigen::Matrix3d& m, int k) -> Eigen::Matrix3d { return a * m * (interval_s / k); });
  // Q = ∫ e^{As} b bᵀ e^{Aᵀs} ds over one interval, term by term: every entry is then exact to rounding,
  // however many orders of the interval it is small (P - Φ P Φᵀ would lose them).
  const Eigen::Matrix3d q =
      taylor_sum(interval_s * b * b.transpose(), [&](const Eigen::Matrix3d& m, int k) -> Eigen::Matrix3d {
        return (a * m + m * a.transpose()) * (interval_s / (k + 1));
      });
  root_ = q.llt().matrixL();
  // Stationary covariance by doubling the time it has run: P(2t) = P(t) + Φ(t) P(t) Φ(t)ᵀ.
  Eigen::Matrix3d p = q, phi = transition_;
  while (phi.norm() > 1e-18) {
    p += (phi * p * phi.transpose()).eval();
    phi = (phi * phi).eval();
  }
  const Eigen::Matrix3d start_root = p.llt().matrixL();
  state_ = start_root * normal_.next3();
}

const Eigen::Vector3d& ShapedNoise::next() {
  state_ = (transition_ * state_ + root_ * normal_.next3()).eval();
  return state_;
}

FirstOrderNoise::FirstOrderNoise(double time_constant_s, double sigma, double interval_s, NormalStream normal)
    : keep_(std::exp(-interval_s / time_constant_s)),
      fresh_(sigma * std::sqrt(-std::expm1(-2.0 * interval_s / time_constant_s))),
      normal_(std::move(normal)) {
  state_ = sigma * normal_.next();
}

double FirstOrderNoise::next() {
  state_ = keep_ * state_ + fresh_ * normal_.next();
  return state_;
}

Wind::Gusts Wind::make_gusts(const ident::Weather& weather, double span_m, double sample_rate_hz,
                             std::uint64_t seed) {
  const DrydenScales scales = dryden_scales(weather);
  const double speed = std::max(weather.wind_m_s, kLeastGustSpeed);
  const double interval_s = 1.0 / sample_rate_hz;
  const double lag_q_s = 4.0 * span_m / (pi * speed);
  const double lag_r_s = 3.0 * span_m / (pi * speed);
  const auto [a_v, b_v] = cross_gust_system(scales.sigma_v_m_s, scales.length_v_m / speed, lag_r_s);
  const auto [a_w, b_w] = cross_gust_system(scales.sigma_w_m_s, scales.length_w_m / speed, lag_q_s);
  return Gusts{
      FirstOrderNoise(scales.length_u_m / speed, scales.sigma_u_m_s, interval_s, {seed, NoiseSource::gust_u}),
      FirstOrderNoise(lag_q_s, dryden_sigma_p(scales, span_m), interval_s, {seed, NoiseSource::gust_p}),
      ShapedNoise(a_v, b_v, interval_s, {seed, NoiseSource::gust_v}),
      ShapedNoise(a_w, b_w, interval_s, {seed, NoiseSource::gust_w}),
      speed,
      lag_q_s,
      lag_r_s};
}

Wind::Wind(const ident::Weather& weather, bool turbulence, double span_m, double sample_rate_hz,
           std::uint64_t seed) {
  const double from = weather.wind_from_deg * pi / 180.0;
  axes_ << std::cos(from), -std::sin(from), 0.0,  //
      std::sin(from), std::cos(from), 0.0,        //
      0.0, 0.0, 1.0;
  steady_m_s_ = -weather.wind_m_s * axes_.col(0);
  if (turbulence && weather.turbulence_wind_m_s > 0.0)
    gusts_ = make_gusts(weather, span_m, sample_rate_hz, seed);
}

Air Wind::next() {
  Air air{steady_m_s_, Eigen::Vector3d::Zero()};
  if (!gusts_) return air;
  const double u = gusts_->u.next();
  const double p = gusts_->p.next();
  const Eigen::Vector3d& side = gusts_->v.next();
  const Eigen::Vector3d& down = gusts_->w.next();
  const double v = gust_of(side);
  const double w = gust_of(down);
  // s/(1 + T s) v = (v - x3)/T.
  const double q = -(w - down(2)) / (gusts_->lag_q_s * gusts_->speed_m_s);
  const double r = (v - side(2)) / (gusts_->lag_r_s * gusts_->speed_m_s);
  air.velocity_m_s += axes_ * Eigen::Vector3d(u, v, w);
  air.rotation_rad_s = axes_ * Eigen::Vector3d(p, q, r);
  return air;
}

}  // namespace hoverwright::excitation
