// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <complex>
#include <vector>

namespace hoverwright::ident {

/// H(s) = gain · Π(s - zero) / Π(s - pole) · exp(-delay s). Real coefficients: complex zeros and poles in
/// pairs.
struct TransferFunction {
  double gain = 0.0;
  std::vector<std::complex<double>> zeros;
  std::vector<std::complex<double>> poles;
  double delay_s = 0.0;

  /// H(jω), ω = 2π f.
  [[nodiscard]] std::complex<double> response(double frequency_hz) const;
};

}  // namespace hoverwright::ident
