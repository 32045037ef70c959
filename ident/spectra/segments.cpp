// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/segments.h"

#include <numbers>

#include "ident/spectra/fft.h"
#include "ident/spectra/window.h"

namespace hoverwright::ident {
namespace {

Eigen::Index count_segments(Eigen::Index samples, Eigen::Index length, Eigen::Index hop) {
  return samples < length ? 0 : (samples - length) / hop + 1;
}

}  // namespace

SegmentSpectra cut_segments(const std::vector<RecordSignals>& records, Eigen::Index length) {
  SegmentSpectra spectra;
  spectra.length = length;
  spectra.hop = length / 4;
  spectra.window = hann_window(length);
  Eigen::Index total = 0;
  for (const RecordSignals& record : records)
    total += count_segments(record.output.size(), length, spectra.hop);
  RealFft fft(length);
  const bool referred = !records.empty() && records.front().excitation.size() > 0;
  spectra.output.resize(total, fft.lines());
  spectra.demand.resize(total, fft.lines());
  if (referred) {
    spectra.excitation.resize(total, fft.lines());
    spectra.excitation_slope.resize(total, fft.lines());
  }
  // d/dn (1 - cos(2πn/N))/2
  const double turn = 2.0 * std::numbers::pi / static_cast<double>(length);
  const Eigen::VectorXd slope =
      0.5 * turn *
      (turn * Eigen::VectorXd::LinSpaced(length, 0.0, static_cast<double>(length - 1))).array().sin();

  Eigen::Index row = 0;
  for (const RecordSignals& record : records) {
    const Eigen::Index count = count_segments(record.output.size(), length, spectra.hop);
    if (count == 0) {
      ++spectra.short_records;
      continue;
    }
    ++spectra.records;
    const Eigen::Index offset = (record.output.size() - length - (count - 1) * spectra.hop) / 2;
    const auto transform = [&](const Eigen::VectorXd& signal, Eigen::Index k, const Eigen::VectorXd& window,
                               Eigen::MatrixXcd& target) {
      const double mean = signal.mean();
      const auto part = signal.segment(offset + k * spectra.hop, length).array();
      target.row(row + k) = fft.transform(((part - mean) * window.array()).matrix()).transpose();
    };
    for (Eigen::Index k = 0; k < count; ++k) {
      transform(record.output, k, spectra.window, spectra.output);
      transform(record.demand, k, spectra.window, spectra.demand);
      if (referred) {
        transform(record.excitation, k, spectra.window, spectra.excitation);
        transform(record.excitation, k, slope, spectra.excitation_slope);
      }
      spectra.record.push_back(spectra.records);
    }
    row += count;
  }
  return spectra;
}

NoiseCorrelation::NoiseCorrelation(const SegmentSpectra& spectra)
    : record_(spectra.record),
      hop_over_length_(static_cast<double>(spectra.hop) / static_cast<double>(spectra.length)) {
  for (int d = 0; d <= kLines; ++d) {
    const auto entry = static_cast<std::size_t>(d);
    same_[entry] = window_correlation(spectra.window, 0, -d);
    shared_power_[entry] = static_cast<double>(record_.size()) * std::norm(same_[entry]);
  }
  for (Eigen::Index lag = 1; lag * spectra.hop < spectra.length; ++lag) {
    Overlap overlap;
    overlap.lag = lag;
    double pairs = 0.0;
    for (std::size_t k = 0; k + static_cast<std::size_t>(lag) < record_.size(); ++k) {
      pairs += record_[k] == record_[k + static_cast<std::size_t>(lag)] ? 1.0 : 0.0;
    }
    for (int d = 0; d <= kLines; ++d) {
      const auto entry = static_cast<std::size_t>(d);
      overlap.forward[entry] = window_correlation(spectra.window, lag * spectra.hop, -d);
      overlap.backward[entry] = window_correlation(spectra.window, -lag * spectra.hop, -d);
      shared_power_[entry] +=
          pairs * (std::norm(overlap.forward[entry]) + std::norm(overlap.backward[entry]));
    }
    overlaps_.push_back(overlap);
  }
}

Eigen::VectorXcd NoiseCorrelation::apply(const Eigen::Ref<const Eigen::VectorXcd>& y, Eigen::Index m,
                                         int d) const {
  const auto entry = static_cast<std::size_t>(d);
  Eigen::VectorXcd result = same_[entry] * y;
  for (const Overlap& overlap : overlaps_) {
    const std::complex<double> turn = std::polar(
        1.0, -2.0 * std::numbers::pi * static_cast<double>((m + d) * overlap.lag) * hop_over_length_);
    const std::complex<double> forward = overlap.forward[entry] * turn;
    const std::complex<double> backward = overlap.backward[entry] * std::conj(turn);
    for (Eigen::Index k = 0, l = overlap.lag; l < y.size(); ++k, ++l) {
      if (record_[static_cast<std::size_t>(k)] != record_[static_cast<std::size_t>(l)]) continue;
      result[k] += forward * y[l];
      result[l] += backward * y[k];
    }
  }
  return result;
}

std::complex<double> NoiseCorrelation::form(const Eigen::Ref<const Eigen::VectorXcd>& x,
                                            const Eigen::Ref<const Eigen::VectorXcd>& y, Eigen::Index m,
                                            int d) const {
  return x.dot(apply(y, m, d));
}

}  // namespace hoverwright::ident
