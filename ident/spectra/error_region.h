// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <complex>
#include <optional>

#include "ident/spectra/frequency_response.h"

namespace hoverwright::ident {

/// Region of the ratio a/b at a confidence: {H : |a - H b|² <= F · [1,-H] C [1,-H]*} with F the quantile of
/// F(2, 2q) (Fieller, J. R. Stat. Soc. B 1954, for complex pairs). It is a disc in the complex plane, or
/// unbounded.
struct ErrorRegion {
  bool bounded = true;
  std::complex<double> centre{};
  double radius = 0.0;
  /// Smallest and largest gain and phase (relative to the estimate's phase) in the disc; phase is absent when
  /// the disc holds the origin.
  double gain_low = 0.0, gain_high = 0.0;
  std::optional<double> phase_half_width_rad;
};

ErrorRegion fieller_region(std::complex<double> a, std::complex<double> b, const PairNoise& noise,
                           double degrees_of_freedom, double confidence);

/// True when `truth` lies in the region (tested on the inequality itself, so it holds for unbounded regions
/// too).
bool in_fieller_region(std::complex<double> truth, std::complex<double> a, std::complex<double> b,
                       const PairNoise& noise, double degrees_of_freedom, double confidence);

}  // namespace hoverwright::ident
