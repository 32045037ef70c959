// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/window.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "ident/failure.h"

namespace hoverwright::ident {

Eigen::VectorXd hann_window(Eigen::Index length) {
  if (length < 2) throw Failure(FailureKind::internal_error, "a window needs two samples or more", "", "");
  Eigen::VectorXd window(length);
  for (Eigen::Index n = 0; n < length; ++n) {
    window[n] =
        0.5 - 0.5 * std::cos(2.0 * std::numbers::pi * static_cast<double>(n) / static_cast<double>(length));
  }
  return window;
}

std::complex<double> window_correlation(const Eigen::VectorXd& window, Eigen::Index shift, int bins) {
  const Eigen::Index length = window.size();
  const double step = -2.0 * std::numbers::pi * bins / static_cast<double>(length);
  std::complex<double> sum{};
  for (Eigen::Index n = std::max<Eigen::Index>(0, shift); n < std::min(length, length + shift); ++n) {
    sum += window[n] * window[n - shift] * std::polar(1.0, step * static_cast<double>(n));
  }
  return sum / window.squaredNorm();
}

double noise_bandwidth_lines(const Eigen::VectorXd& window) {
  const double sum = window.sum();
  return window.squaredNorm() / (sum * sum) * static_cast<double>(window.size());
}

}  // namespace hoverwright::ident
