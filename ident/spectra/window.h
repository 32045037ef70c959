// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <complex>

namespace hoverwright::ident {

/// Periodic Hann window w[n] = (1 - cos(2πn/N))/2, n = 0..N-1. @throws Failure (internal_error) if length
/// < 2.
Eigen::VectorXd hann_window(Eigen::Index length);

/// Σ_n w[n] w[n-shift] exp(-j2π·bins·n/N) / Σ w², the correlation of the windowed transforms of white noise
/// between segments `shift` samples apart and lines `bins` apart.
std::complex<double> window_correlation(const Eigen::VectorXd& window, Eigen::Index shift, int bins);

/// Noise bandwidth Σw²/(Σw)² · N, in lines (1.5 for Hann).
double noise_bandwidth_lines(const Eigen::VectorXd& window);

}  // namespace hoverwright::ident
