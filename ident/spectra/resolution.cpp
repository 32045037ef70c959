// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/resolution.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>

namespace hoverwright::ident {
namespace {

constexpr Eigen::Index kHalfWidth = 3;  // seven lines averaged

/// Squared bend and slope error of line k, what noise alone would make of it on average, and the noise.
struct Bend {
  double measured = 0.0, from_noise = 0.0, variance = 0.0;
};

Bend bend_at(const FrequencyResponse& response, double flank, Eigen::Index k) {
  using Complex = std::complex<double>;
  const Complex estimate = response.a[k] / response.b[k];
  const std::array<Complex, 3> weight{Complex(1.0 / 6.0, -0.5 * flank), Complex(-2.0 / 6.0, 0.0),
                                      Complex(1.0 / 6.0, 0.5 * flank)};
  std::array<double, 3> sigma{};
  Complex sum{};
  for (std::size_t j = 0; j < 3; ++j) {
    const Eigen::Index line = k - 1 + static_cast<Eigen::Index>(j);
    sum += weight[j] * (response.a[line] - estimate * response.b[line]);
    sigma[j] =
        std::sqrt(std::max(0.0, response.noise[static_cast<std::size_t>(line)].variance_of_error(estimate)));
  }
  // E|Σ w_j n_j|² with the correlation E[n_j n_{j+d}*] of neighbouring lines.
  Bend bend;
  bend.measured = std::norm(sum);
  for (std::size_t j = 0; j < 3; ++j) bend.from_noise += std::norm(weight[j]) * sigma[j] * sigma[j];
  for (std::size_t d = 1; d < 3; ++d) {
    for (std::size_t j = 0; j + d < 3; ++j) {
      const Complex correlation = response.neighbour_correlation[d - 1][k - 1 + static_cast<Eigen::Index>(j)];
      bend.from_noise +=
          2.0 * (weight[j] * std::conj(weight[j + d]) * correlation).real() * sigma[j] * sigma[j + d];
    }
  }
  bend.variance = sigma[1] * sigma[1];
  return bend;
}

}  // namespace

EnergyOffset energy_offset(const SegmentSpectra& spectra) {
  EnergyOffset offset{Eigen::VectorXd::Zero(spectra.lines()), Eigen::VectorXd::Zero(spectra.lines())};
  const double per_line = static_cast<double>(spectra.length) / (2.0 * std::numbers::pi);
  for (Eigen::Index m = 0; m < spectra.lines() && spectra.excitation.size() > 0; ++m) {
    const double energy = spectra.excitation.col(m).squaredNorm();
    if (!(energy > 0.0)) continue;
    const std::complex<double> kappa =
        spectra.excitation.col(m).dot(spectra.excitation_slope.col(m)) / energy;
    offset.lines[m] = -kappa.imag() * per_line;
    offset.flank[m] = kappa.real() * per_line;
  }
  return offset;
}

void allow_for_resolution(const Eigen::VectorXd& flank, FrequencyResponse& response) {
  const Eigen::Index points = response.points();
  if (points < 3) return;
  Eigen::VectorXd measured = Eigen::VectorXd::Zero(points), from_noise = measured;
  for (Eigen::Index k = 1; k + 1 < points; ++k) {
    const Bend bend = bend_at(response, flank[k], k);
    if (!(bend.variance > 0.0)) continue;
    measured[k] = bend.measured / bend.variance;
    from_noise[k] = bend.from_noise / bend.variance;
  }
  for (Eigen::Index k = 0; k < points; ++k) {
    // The ends have no second difference of their own and take their neighbours'.
    const Eigen::Index low = std::clamp<Eigen::Index>(k - kHalfWidth, 1, points - 2);
    const Eigen::Index high = std::clamp<Eigen::Index>(k + kHalfWidth, 1, points - 2);
    const Eigen::Index count = high - low + 1;
    const double excess = measured.segment(low, count).mean() - from_noise.segment(low, count).mean();
    if (!(excess > 0.0)) continue;
    PairNoise& noise = response.noise[static_cast<std::size_t>(k)];
    noise = {noise.aa * (1.0 + excess), noise.bb * (1.0 + excess), noise.ab * (1.0 + excess)};
  }
}

}  // namespace hoverwright::ident
