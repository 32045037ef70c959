// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <array>
#include <complex>
#include <vector>

#include "ident/spectra/overlapped_windows.h"

namespace hoverwright::ident {

/// Windowed transforms of the segments of all records, segments × lines (line m at m · rate / length), and
/// how the segments follow each other. The Fourier transform's time origin is the first sample of each
/// segment.
struct SegmentSpectra {
  Eigen::Index length = 0;
  Eigen::Index hop = 0;
  Eigen::VectorXd window;
  Eigen::MatrixXcd excitation, demand, output;  ///< excitation empty for the direct estimate
  Eigen::MatrixXcd
      excitation_slope;     ///< the excitation windowed by the window's derivative, see cut_segments
  std::vector<int> record;  ///< of each segment; a record's segments are consecutive
  int records = 0;          ///< records with at least one segment
  int short_records = 0;    ///< records shorter than a segment, left out

  [[nodiscard]] Eigen::Index segments() const { return output.rows(); }
  [[nodiscard]] Eigen::Index lines() const { return output.cols(); }
};

/// Cuts each record, its mean removed, into Hann windows of `length` (a multiple of four) with 75 % overlap;
/// what is left over is shared between the record's two ends. Segments do not straddle records.
///
/// Hops of a quarter, not half: Σ w² over the segments is then the same at all times. With half-window hops a
/// sweep passes a line where Σ w² rises or falls, and the response's delay τ biases the estimate by τ/2 · d
/// ln(Σ w²)/dt, up to 2.2 τ / window; neighbouring segments' leakage errors do not cancel (measured: 2 %
/// instead of 0.4 % at 1-2 Hz on a calm roll axis).
///
/// `excitation_slope` is what the response leaks to first order: with G(ω) linear across the main lobe a
/// segment's output is Y_k = G R_k + j G' Σ_n w'(n) r(n) exp(-jωn).
SegmentSpectra cut_segments(const std::vector<RecordSignals>& records, Eigen::Index length);

/// Correlation of the windowed transforms of noise between segments and lines,
///   Γ_kl(m, d) = E[E_k(m) E_l(m+d)*] / S = c((l-k) hop, -d) exp(j2π(m+d)(k-l) hop/N),
/// c = window_correlation, for noise whose spectrum is flat over the window's main lobe. The exponential
/// comes from the segment-local time origin. Segments of different records, or too far apart to overlap,
/// share nothing.
class NoiseCorrelation {
 public:
  static constexpr int kLines =
      4;  ///< lines d = 0..kLines apart are known; beyond, the Hann window's correlation is < 1e-3

  explicit NoiseCorrelation(const SegmentSpectra& spectra);

  /// Σ_kl conj(x_k) y_l Γ_kl(m, d).
  [[nodiscard]] std::complex<double> form(const Eigen::Ref<const Eigen::VectorXcd>& x,
                                          const Eigen::Ref<const Eigen::VectorXcd>& y, Eigen::Index m,
                                          int d) const;
  /// Σ_l Γ_kl(m, d) y_l.
  [[nodiscard]] Eigen::VectorXcd apply(const Eigen::Ref<const Eigen::VectorXcd>& y, Eigen::Index m,
                                       int d = 0) const;
  /// Σ_kl |Γ_kl(d)|²: what lines d apart share in a sum of noise powers over the segments.
  [[nodiscard]] double shared_power(int d) const { return shared_power_[static_cast<std::size_t>(d)]; }

 private:
  /// Segments `lag` apart: c(lag hop, -d) for d = 0..kLines, and which k have a partner k + lag in their
  /// record.
  struct Overlap {
    Eigen::Index lag = 0;
    std::array<std::complex<double>, kLines + 1> forward, backward;
  };
  std::vector<int> record_;
  double hop_over_length_ = 0.0;
  std::array<std::complex<double>, kLines + 1> same_;
  std::vector<Overlap> overlaps_;
  std::array<double, kLines + 1> shared_power_{};
};

}  // namespace hoverwright::ident
