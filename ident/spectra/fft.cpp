// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/fft.h"

#include <fftw3.h>

#include <algorithm>
#include <mutex>
#include <new>

#include "ident/failure.h"

namespace hoverwright::ident {
namespace {

std::mutex& planner_lock() {
  static std::mutex lock;
  return lock;
}

}  // namespace

RealFft::RealFft(Eigen::Index length) : length_(length) {
  if (length < 2)
    throw Failure(FailureKind::internal_error, "a Fourier transform needs two samples or more", "", "");
  const std::lock_guard guard(planner_lock());
  input_ = fftw_alloc_real(static_cast<std::size_t>(length_));
  output_ = reinterpret_cast<std::complex<double>*>(fftw_alloc_complex(static_cast<std::size_t>(lines())));
  if (input_ != nullptr && output_ != nullptr) {
    plan_ = fftw_plan_dft_r2c_1d(static_cast<int>(length_), input_, reinterpret_cast<fftw_complex*>(output_),
                                 FFTW_ESTIMATE);
  }
  if (plan_ == nullptr) {
    fftw_free(input_);
    fftw_free(output_);
    throw std::bad_alloc();
  }
}

RealFft::~RealFft() {
  const std::lock_guard guard(planner_lock());
  fftw_destroy_plan(plan_);
  fftw_free(input_);
  fftw_free(output_);
}

Eigen::VectorXcd RealFft::transform(const Eigen::Ref<const Eigen::VectorXd>& x) {
  if (x.size() != length_) {
    throw Failure(FailureKind::internal_error, "the sequence does not have the transform's length", "", "");
  }
  std::copy_n(x.data(), length_, input_);
  fftw_execute(plan_);
  return Eigen::Map<const Eigen::VectorXcd>(output_, lines());
}

}  // namespace hoverwright::ident
