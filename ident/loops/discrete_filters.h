// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <complex>

#include "ident/loop_gains.h"

namespace hoverwright::ident {

/// Second-order Butterworth low-pass, bilinear transform with the cutoff pre-warped. The code that flies in
/// the rehearsal is the code the margins are computed from.
class LowPass2 {
 public:
  /// cutoff in (0, rate/2). @throws Failure (bad_input) otherwise.
  LowPass2(double cutoff_hz, double sample_rate_hz);
  double step(double input);
  void reset(double value);  ///< as if the input had been `value` for ever
  [[nodiscard]] std::complex<double> response(double frequency_hz) const;

 private:
  double rate_hz_;
  double b0_, b1_, b2_, a1_, a2_;
  double s1_ = 0.0, s2_ = 0.0;
};

/// Parallel PID as a difference equation at interval Δ:
///   u[k] = kp e[k] + I[k] - kd D[k],  e = set point - measurement
///   I[k+1] = I[k] + ki Δ e[k]          (forward Euler; held while u is at its limit and e would push
///   further) D[k] = α D[k-1] + (1-α) (m[k] - m[k-1])/Δ,  α = exp(-2π derivative_cutoff Δ)
class Pid {
 public:
  Pid(const LoopGains& gains, double sample_rate_hz);
  double step(double set_point, double measurement);
  void reset(double measurement, double integral = 0.0);

  /// Error to output: kp + ki Δ z⁻¹/(1 - z⁻¹).
  [[nodiscard]] std::complex<double> error_response(double frequency_hz) const;
  /// Measurement to (minus) output through the derivative: kd (1-α)(1 - z⁻¹)/Δ/(1 - α z⁻¹).
  [[nodiscard]] std::complex<double> derivative_response(double frequency_hz) const;

 private:
  LoopGains gains_;
  double interval_s_;
  double alpha_;
  double integral_ = 0.0, derivative_ = 0.0, last_measurement_ = 0.0;
};

}  // namespace hoverwright::ident
