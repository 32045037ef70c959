// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <complex>

struct fftw_plan_s;  // FFTW's own type; <fftw3.h> stays in the .cpp

namespace hoverwright::ident {

/// Discrete Fourier transform of real sequences of one length N, X[m] = Σ_n x[n] exp(-j2πmn/N), m = 0..N/2.
///
/// Plans are estimated, never timed, so that the same input gives the same bytes every time. FFTW's planner
/// is not thread-safe and is locked here; `transform` writes to buffers of the object, so each thread needs
/// its own.
class RealFft {
 public:
  /// @throws Failure (internal_error) if length < 2.
  explicit RealFft(Eigen::Index length);
  ~RealFft();
  RealFft(const RealFft&) = delete;
  RealFft& operator=(const RealFft&) = delete;

  [[nodiscard]] Eigen::Index length() const { return length_; }
  [[nodiscard]] Eigen::Index lines() const { return length_ / 2 + 1; }
  /// @throws Failure (internal_error) if x has another length.
  Eigen::VectorXcd transform(const Eigen::Ref<const Eigen::VectorXd>& x);

 private:
  Eigen::Index length_;
  double* input_ = nullptr;
  std::complex<double>* output_ = nullptr;
  fftw_plan_s* plan_ = nullptr;
};

}  // namespace hoverwright::ident
