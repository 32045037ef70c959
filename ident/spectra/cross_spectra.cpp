// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/failure.h"
#include "ident/spectra/fft.h"
#include "ident/spectra/overlapped_windows.h"
#include "ident/spectra/window.h"

namespace hoverwright::ident {

CrossSpectra cross_spectra(const Eigen::Ref<const Eigen::VectorXd>& x,
                           const Eigen::Ref<const Eigen::VectorXd>& y, double sample_rate_hz,
                           Eigen::Index segment_length) {
  if (x.size() != y.size()) {
    throw Failure(FailureKind::bad_input, "the two signals differ in length", "cross_spectra", "");
  }
  if (!(sample_rate_hz > 0.0)) {
    throw Failure(FailureKind::bad_input, "the sample rate must be positive", "cross_spectra", "");
  }
  if (segment_length < 2 || segment_length > x.size()) {
    throw Failure(FailureKind::bad_input, "the window must have 2 samples or more and fit into the signal",
                  "cross_spectra", "Use a shorter window.");
  }
  const Eigen::VectorXd window = hann_window(segment_length);
  const Eigen::VectorXd x_centred = x.array() - x.mean();
  const Eigen::VectorXd y_centred = y.array() - y.mean();
  const Eigen::Index hop = segment_length - segment_length / 2;
  RealFft fft(segment_length);

  CrossSpectra spectra;
  spectra.frequency_hz = Eigen::VectorXd::LinSpaced(fft.lines(), 0.0, static_cast<double>(fft.lines() - 1)) *
                         (sample_rate_hz / static_cast<double>(segment_length));
  spectra.xx = spectra.yy = Eigen::VectorXd::Zero(fft.lines());
  spectra.xy = Eigen::VectorXcd::Zero(fft.lines());
  for (Eigen::Index start = 0; start + segment_length <= x.size(); start += hop) {
    const Eigen::VectorXcd fx = fft.transform(x_centred.segment(start, segment_length).cwiseProduct(window));
    const Eigen::VectorXcd fy = fft.transform(y_centred.segment(start, segment_length).cwiseProduct(window));
    spectra.xx += fx.cwiseAbs2();
    spectra.yy += fy.cwiseAbs2();
    spectra.xy += fx.conjugate().cwiseProduct(fy);
    ++spectra.segments;
  }
  // One-sided: every line stands for two but zero and, in an even length, the Nyquist frequency.
  Eigen::VectorXd scale = Eigen::VectorXd::Constant(
      fft.lines(), 2.0 / (sample_rate_hz * window.squaredNorm() * spectra.segments));
  scale[0] *= 0.5;
  if (segment_length % 2 == 0) scale[fft.lines() - 1] *= 0.5;
  spectra.xx.array() *= scale.array();
  spectra.yy.array() *= scale.array();
  spectra.xy.array() *= scale.array();
  return spectra;
}

}  // namespace hoverwright::ident
