// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>

#include "ident/spectra/frequency_response.h"
#include "ident/spectra/segments.h"

namespace hoverwright::ident {

/// Where the excitation's energy in each line's main lobe lies. To first order in the slope of G
///   a = Σ Y_k R_k* / Σ|R_k|² = G + j G' κ,  κ = Σ R_k* D_k / Σ|R_k|²,  D = excitation_slope (G' per radian
///   per sample).
struct EnergyOffset {
  /// -Im κ · N/2π: the energy lies so many lines above the line, and the point belongs there. Zero in the
  /// middle of a sweep; at its start the energy lies above the lines (on a roll axis 12 % of error at the
  /// starting frequency becomes 2 %).
  Eigen::VectorXd lines;
  /// Re κ · N/2π: what is left where the first or last windows of a record see a sweep's end on one flank
  /// only.
  Eigen::VectorXd flank;
};

EnergyOffset energy_offset(const SegmentSpectra& spectra);

/// Raises the noise of a response by what the windows' finite resolution leaves: where G bends within the
/// main lobe, the average over the lobe errs by G''/2 times the window's second moment; for energy spread
/// evenly over the windows (Σ w w'' / Σ w² = -(4/3)(π/N)²) that is one sixth of the second difference of the
/// points; the flank term adds j · flank times their slope per line. The square of both in the direction [1,
/// -Ĥ], in units of the noise, averaged over seven lines and less what the noise itself brings there, is the
/// factor added. An allowance for a bias, not a correction: in calm air it decides, in gusts it vanishes.
/// `flank` has one entry per point.
void allow_for_resolution(const Eigen::VectorXd& flank, FrequencyResponse& response);

}  // namespace hoverwright::ident
