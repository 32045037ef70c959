// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <complex>
#include <cstdint>
#include <random>
#include <vector>

#include "ident/spectra/overlapped_windows.h"

namespace hoverwright::tests {

/// Exponential chirp with one cycle held at the lowest frequency, raised-cosine fades and 3 s of quiet before
/// and after.
Eigen::VectorXd quiet_chirp(double low_hz, double high_hz, double duration_s, double amplitude,
                            double rate_hz);

/// Roll axis 55 e^{-0.012 s}/((0.045 s + 1)(s + 0.8)) at 400 Hz under a zero-order hold, rate PI 0.22/0.25
/// inside angle P 3 1/s; the angle is the summed gyro. The excitation is added to the demand. Gusts are a
/// torque, AR(1) with a corner of 1 Hz, held between samples; the gyro's white noise is inside the loop.
class RollLoop {
 public:
  static constexpr double kRateHz = 400.0;
  explicit RollLoop(bool closed = true);

  struct Disturbance {
    double gust = 0.0;  ///< standard deviation of the torque, in units of demand
    double gyro = 0.0;  ///< standard deviation per sample, rad/s
  };
  /// Demand and measured rate for one excitation; starts from rest after two seconds of gusts.
  [[nodiscard]] ident::RecordSignals fly(const Eigen::VectorXd& excitation, const Disturbance& disturbance,
                                         std::mt19937_64& random) const;

  /// Exact sampled response from demand to rate (closed form of the partial fractions under the hold, any
  /// delay).
  [[nodiscard]] static std::complex<double> truth(double frequency_hz);

 private:
  bool closed_;
};

/// Gust level at which the rate's rms from gusts alone is `ratio` of that from the excitation alone.
double gust_for_ratio(const RollLoop& loop, const Eigen::VectorXd& excitation, double ratio);

}  // namespace hoverwright::tests
