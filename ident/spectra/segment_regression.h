// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <vector>

#include "ident/spectra/excited_band.h"
#include "ident/spectra/frequency_response.h"
#include "ident/spectra/segments.h"

namespace hoverwright::ident {

/// Least squares over the segments, line by line: Y_k = a X_k + E_y,k and U_k = b X_k + E_u,k.
struct SegmentRegression {
  Eigen::VectorXd energy;     ///< Σ|X_k|²
  Eigen::VectorXcd a, b;      ///< slopes of output and demand
  Eigen::VectorXd inflation;  ///< g = Σ_kl X_k* X_l Γ_kl / Σ|X_k|²: variance of a slope is S_e g / Σ|X_k|²
  std::vector<PairNoise> residual;  ///< S_e = Σ Ê Ê* / tr(QΓ), unbiased for stationary noise
  Eigen::VectorXd
      degrees_of_freedom;  ///< of `residual`, by matching two moments (Satterthwaite, Biometrics Bull. 1946)
};

/// Regresses output and demand on `regressor` (segments × lines) for the lines of `band`; the other entries
/// stay zero, as do the slopes of lines without any energy. `nuisance` (empty, or as large) is taken out of
/// the residual as well, but does not touch the slopes: with the part of it orthogonal to X, normalised, and
/// X, normalised, as the columns of B, Ê = (I - B B*) E, the divisor is K - tr(B*ΓB).
SegmentRegression regress_segments(const SegmentSpectra& spectra, const Eigen::MatrixXcd& regressor,
                                   const Eigen::MatrixXcd& nuisance, const NoiseCorrelation& correlation,
                                   const LineBand& band);

/// The residual noise averaged over neighbouring lines.
struct PooledNoise {
  std::vector<PairNoise> spectrum;     ///< S_e per line
  Eigen::VectorXd degrees_of_freedom;  ///< the correlation of neighbouring lines counted
};

/// Averages over lines m-P..m+P (cut at the ends of `band`) with the smallest P that brings `wanted` degrees
/// of freedom.
PooledNoise pool_noise(const SegmentRegression& regression, const NoiseCorrelation& correlation,
                       const LineBand& band, double wanted);

}  // namespace hoverwright::ident
