// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <vector>

#include "ident/spectra/frequency_response.h"

namespace hoverwright::ident {

/// Signals of one record, one length; `excitation` empty for the direct estimate.
struct RecordSignals {
  Eigen::VectorXd excitation;
  Eigen::VectorXd demand;
  Eigen::VectorXd output;
};

struct OverlappedWindowsOptions {
  double sample_rate_hz = 0.0;
  double low_hz = 0.0;   ///< lowest line kept; 0: found from the excitation's spectrum (or the resolution)
  double high_hz = 0.0;  ///< highest line kept; 0: found from the excitation's spectrum (or 0.4 of the rate)
  double segment_s = 0.0;            ///< window length; 0: chosen from the records
  int pool_degrees_of_freedom = 20;  ///< neighbouring lines are pooled until the noise has at least so many
};

/// Overlapped-window estimate (Welch, IEEE Trans. Audio Electroacoust. 1967), Hann, 75 % overlap, referred to
/// the excitation.
///
/// Model: Y_k = a R_k + E_y,k, U_k = b R_k + E_u,k over segments k of all records; a = Σ Y_k R_k* / Σ |R_k|²,
/// b alike. A point stands at the frequency where the excitation's energy in the line's main lobe lies
/// (EnergyOffset): the line itself in the middle of a sweep, up to half a line beside it at a sweep's start.
/// Lines further off are dropped. Noise: residual spectra S_e of (E_y, E_u) over segments, the first-order
/// leakage of the response taken out, overlap counted in their degrees of freedom, pooled over neighbouring
/// lines; C = S_e · Σ_kl R_k* R_l Γ_kl / (Σ|R_k|²)², where Γ is the correlation of the windowed noise between
/// segments (NoiseCorrelation); the correlation between neighbouring lines likewise. C is raised where the
/// response bends within the main lobe by more than the noise (allow_for_resolution). Direct form, without
/// excitation: a = S_yu/S_uu, b = 1, noise in a only. The mean of each record is removed. Assumes noise
/// stationary over the records and the response's memory short against the window.
/// @throws Failure (unsupported) when the records are too short for two segments or no line is excited;
/// (bad_input) on size mismatch or non-finite samples, or an impossible band.
FrequencyResponse estimate_overlapped_windows(const std::vector<RecordSignals>& records,
                                              const OverlappedWindowsOptions& options);

/// Window length in samples the estimator would choose: a fifth of the longest record, but 2.5 to 3 cycles of
/// the frequency the sweep starts from, a third of the longest record at most; without excitation an eighth
/// of the longest record, 10 s at most. Rounded so that the windows fill the record and to a multiple of four
/// that FFTW likes (no prime factor above seven).
Eigen::Index choose_segment_length(const std::vector<RecordSignals>& records,
                                   const OverlappedWindowsOptions& options);

/// Plain overlapped-window spectra (Hann, overlap of half a window rounded down, mean of the whole record
/// removed), one-sided densities (unit²/Hz), for checks and plots. Sxy = E[conj(X) Y]. @throws Failure
/// (bad_input) on unusable sizes.
struct CrossSpectra {
  Eigen::VectorXd frequency_hz;
  Eigen::VectorXd xx, yy;
  Eigen::VectorXcd xy;
  int segments = 0;
};
CrossSpectra cross_spectra(const Eigen::Ref<const Eigen::VectorXd>& x,
                           const Eigen::Ref<const Eigen::VectorXd>& y, double sample_rate_hz,
                           Eigen::Index segment_length);

}  // namespace hoverwright::ident
