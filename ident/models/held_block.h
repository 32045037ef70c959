// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <complex>

namespace hoverwright::ident {

/// exp(z) - 1 without cancellation for small |z|.
std::complex<double> expm1(std::complex<double> z);

/// ∫₀ˣ tᵏ exp(-pt) dt for k = 0, 1, 2 and any real p; a series near p x = 0.
struct ExponentialMoments {
  double zeroth, first, second;
};
ExponentialMoments exponential_moments(double pole, double span);

/// The part of a first-order block 1/(s + p) behind a zero-order hold that does not depend on frequency, for
/// an output looked at `advance_s` = m after a sample, 0 <= m <= Δ.
struct HeldBlock {
  double pole = 0.0;
  double decay_sample = 0.0;   ///< exp(-pΔ)
  double decay_advance = 0.0;  ///< exp(-pm)
  ExponentialMoments sample{}, advance{};

  HeldBlock(double pole_rad_s, double sample_s, double advance_s);
};

/// Frequency response of the held block without its whole samples of delay, and its derivatives:
///   B(p) = [(1 - z⁻¹) φ(m) + z⁻¹ φ(Δ)] / (1 - exp(-pΔ) z⁻¹), φ(x) = (1 - exp(-px)) / p
/// (modified z-transform: Åström & Wittenmark, Computer-Controlled Systems, ch. 2).
struct HeldResponse {
  std::complex<double> value;             ///< B
  std::complex<double> slope, curvature;  ///< dB/dp, d²B/dp²
  std::complex<double> by_advance;        ///< dB/dm
  std::complex<double> by_advance_slope;  ///< d²B/(dm dp)
};
HeldResponse held_response(const HeldBlock& block, double omega_sample, double sample_s, double advance_s);

}  // namespace hoverwright::ident
