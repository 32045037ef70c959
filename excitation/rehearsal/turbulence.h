// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <cstdint>
#include <optional>

#include "excitation/rehearsal/random.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::excitation {

/// Motion of the air at the vehicle, in north-east-down axes: velocity at the centre of gravity and the
/// rotation of the linear gust field about it.
struct Air {
  Eigen::Vector3d velocity_m_s = Eigen::Vector3d::Zero();
  Eigen::Vector3d rotation_rad_s = Eigen::Vector3d::Zero();
};

/// Intensities and lengths of Dryden turbulence at low altitude (MIL-HDBK-1797, 10 to 1000 ft; from memory):
///   σ_w = 0.1 W20,  σ_u/σ_w = σ_v/σ_w = (0.177 + 0.000823 h)^-0.4,  2 L_w = h,  L_u = 2 L_v = h (0.177 +
///   0.000823 h)^-1.2,  h in feet.
/// `length_v_m` and `length_w_m` hold 2 L_v and 2 L_w, the only way they enter the spectra.
struct DrydenScales {
  double sigma_u_m_s = 0.0, sigma_v_m_s = 0.0, sigma_w_m_s = 0.0;
  double length_u_m = 0.0, length_v_m = 0.0, length_w_m = 0.0;
};
/// @throws Failure (bad_input) when the height is outside 10 to 1000 ft (3.05 to 304.8 m).
DrydenScales dryden_scales(const ident::Weather& weather);

/// Least speed at which the vehicle meets the frozen gust field. In light wind a hovering vehicle would
/// otherwise see gusts that never change.
inline constexpr double kLeastGustSpeed = 2.0;  // m/s

/// Standard deviation of the rolling gust field p, from the spectrum of MIL-HDBK-1797 (from memory)
/// integrated over frequency:
///   Φ_p = σ_w² 0.8 (π/(4b))^(1/3) (2 L_w)^(-2/3) / (V (1 + (4bω/(πV))²)),   σ_p² = 0.8 π²/(8b)
///   (π/(4b))^(1/3) (2 L_w)^(-2/3) σ_w²
double dryden_sigma_p(const DrydenScales& scales, double span_m);

/// A linear system ẋ = A x + b n driven by white noise of unit intensity, stepped exactly, started from its
/// stationary distribution.
class ShapedNoise {
 public:
  ShapedNoise(const Eigen::Matrix3d& a, const Eigen::Vector3d& b, double interval_s, NormalStream normal);
  const Eigen::Vector3d& next();

 private:
  Eigen::Matrix3d transition_, root_;
  Eigen::Vector3d state_;
  NormalStream normal_;
};

/// First-order noise with time constant and standard deviation given, exact in discrete time, stationary from
/// the start.
class FirstOrderNoise {
 public:
  FirstOrderNoise(double time_constant_s, double sigma, double interval_s, NormalStream normal);
  double next();

 private:
  double keep_, fresh_, state_;
  NormalStream normal_;
};

/// Steady wind plus Dryden turbulence (MIL-HDBK-1797 filters, from memory), sampled at the loop rate. The
/// gust axes are x against the wind (the way the vehicle moves through the air), z down. The field is frozen
/// and met at the wind speed, at least kLeastGustSpeed.
///   u: σ_u sqrt(2T/π)/(1 + T s), T = L_u/V           v: σ_v sqrt(T/π)(1 + √3 T s)/(1 + T s)², T = 2 L_v/V;
///   w alike p: first order, corner πV/(4b), own noise         q = -∂w/∂x = -(s/V)/(1 + 4b/(πV) s) w     r =
///   ∂v/∂x = (s/V)/(1 + 3b/(πV) s) v
class Wind {
 public:
  /// `span_m` is b, the distance across the rotor hubs.
  Wind(const ident::Weather& weather, bool turbulence, double span_m, double sample_rate_hz,
       std::uint64_t seed);
  Air next();

 private:
  struct Gusts {
    FirstOrderNoise u, p;
    ShapedNoise v, w;
    double speed_m_s, lag_q_s, lag_r_s;
  };
  static Gusts make_gusts(const ident::Weather& weather, double span_m, double sample_rate_hz,
                          std::uint64_t seed);

  Eigen::Matrix3d axes_;  ///< columns: gust axes in north-east-down
  Eigen::Vector3d steady_m_s_;
  std::optional<Gusts> gusts_;
};

}  // namespace hoverwright::excitation
