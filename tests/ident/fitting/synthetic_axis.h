// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <cmath>
#include <complex>
#include <limits>
#include <numbers>
#include <random>
#include <string>

#include "ident/models/structure.h"
#include "ident/spectra/frequency_response.h"
#include "tests/ident/models/vehicles.h"

namespace hoverwright::tests {

/// An axis flown closed loop: u = r - C y, y = H u + v. Referred to r, b = S and a = H S with S = 1/(1 + H
/// C), and the disturbance v is in both: n_a = S v / R, n_b = -C n_a. Log chirp (|R|² ~ 1/f), gusts below 1
/// Hz plus sensor noise.
struct SyntheticAxis {
  std::string structure;
  Eigen::VectorXd parameters;
  double proportional = 0.0, integral = 0.0;  ///< C = proportional + integral / s
  bool acts_on_integral = false;              ///< C / s instead: a climb-rate loop on an acceleration output
  double noise = 0.02;                        ///< of n_a at 1 Hz, part of |a| there
  double low_hz = 0.35, high_hz = 24.0, step_hz = 0.2;
  double sample_rate_hz = 400.0;

  [[nodiscard]] Eigen::VectorXd frequency_hz() const {
    const auto count = static_cast<Eigen::Index>(std::floor((high_hz - low_hz) / step_hz + 1e-9)) + 1;
    return low_hz + step_hz * Eigen::ArrayXd::LinSpaced(count, 0.0, static_cast<double>(count - 1));
  }
  [[nodiscard]] std::complex<double> controller(double f) const {
    const std::complex<double> s(0.0, 2.0 * std::numbers::pi * f);
    const std::complex<double> c = proportional + integral / s;
    return acts_on_integral ? c / s : c;
  }
};

inline SyntheticAxis roll_axis() {
  return {"rate_motor_lag", values({230, 2.0, 0.05, 0.0083}), 0.045, 0.05, false};
}
inline SyntheticAxis yaw_axis() {
  return {"yaw_reaction", values({10, 0.3, 0.05, 0.1, 0.0083}), 0.25, 0.15, false};
}
inline SyntheticAxis heave_axis() {
  return {"heave_accel", values({24, 0.8, 0.05, 0.0083}), 0.10, 0.05, true};
}

/// The points without noise, with the covariance the noise would have. `correlated`: neighbouring lines as
/// from a Hann window, correlation -2/3 and 1/6 turned by the phase of the chirp.
inline ident::FrequencyResponse exact_points(const SyntheticAxis& axis, bool correlated) {
  const Eigen::VectorXd f = axis.frequency_hz();
  const Eigen::VectorXcd h =
      ident::Structure::find(axis.structure).sampled_response(axis.parameters, f, axis.sample_rate_hz);
  ident::FrequencyResponse points;
  points.method = "synthetic";
  points.records = 1;
  points.sample_rate_hz = axis.sample_rate_hz;
  points.frequency_hz = f;
  points.a.resize(f.size());
  points.b.resize(f.size());
  points.degrees_of_freedom = Eigen::VectorXd::Constant(f.size(), std::numeric_limits<double>::infinity());
  for (auto& rho : points.neighbour_correlation) rho = Eigen::VectorXcd::Zero(f.size());
  const auto at_one_hz = ident::Structure::find(axis.structure)
                             .sampled_response(axis.parameters, values({1.0}), axis.sample_rate_hz);
  const double scale = axis.noise * std::abs(at_one_hz[0]);
  for (Eigen::Index k = 0; k < f.size(); ++k) {
    const std::complex<double> c = axis.controller(f[k]), s = 1.0 / (1.0 + h[k] * c);
    points.b[k] = s;
    points.a[k] = h[k] * s;
    const double disturbance = 1.0 / (1.0 + f[k] * f[k]) + 0.05;
    const double deviation = scale * std::abs(s) * std::sqrt(f[k]) * std::sqrt(disturbance / 0.55);
    const double variance = deviation * deviation;
    points.noise.push_back({variance, std::norm(c) * variance, -std::conj(c) * variance});
  }
  if (correlated) {
    for (int d = 1; d <= 2; ++d)
      for (Eigen::Index k = 0; k + d < f.size(); ++k) {
        // n_k = s_k e_k and n_b = -C n_a: the correlation of a - H b turns with S (1 + H C) = 1, so e_k alone
        // counts.
        const double turn = 0.3 * static_cast<double>(k * k - (k + d) * (k + d)) / 40.0;
        points.neighbour_correlation[static_cast<std::size_t>(d - 1)][k] =
            std::polar(d == 1 ? -2.0 / 3.0 : 1.0 / 6.0, turn);
      }
  }
  return points;
}

/// One flight: noise of the stated covariance and correlation added to exact points.
inline ident::FrequencyResponse noisy_points(const SyntheticAxis& axis, const ident::FrequencyResponse& exact,
                                             bool correlated, std::mt19937_64& engine) {
  std::normal_distribution<double> normal(0.0, std::sqrt(0.5));
  ident::FrequencyResponse points = exact;
  const Eigen::Index n = exact.points();
  const Eigen::VectorXcd h = exact.a.cwiseQuotient(exact.b);
  Eigen::VectorXcd white(n + 2);
  for (auto& w : white) {
    const double re = normal(engine);
    w = std::complex<double>(re, normal(engine));
  }
  for (Eigen::Index k = 0; k < n; ++k) {
    std::complex<double> e = white[k + 1];
    if (correlated) {
      e = (white[k + 1] - 0.5 * white[k] - 0.5 * white[k + 2]) / std::sqrt(1.5);
      e *= std::polar(1.0, 0.3 * static_cast<double>(k * k) / 40.0);
    }
    // The error a - H b of unit S (1 + H C) = 1: e is the disturbance itself, S turns it into n_a.
    const std::complex<double> c = axis.controller(exact.frequency_hz[k]);
    const std::complex<double> s = 1.0 / (1.0 + h[k] * c);
    const std::complex<double> na =
        std::sqrt(exact.noise[static_cast<std::size_t>(k)].aa) * s / std::abs(s) * e;
    points.a[k] += na;
    points.b[k] -= c * na;
  }
  return points;
}

}  // namespace hoverwright::tests
