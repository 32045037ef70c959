// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/excited_band.h"

#include <algorithm>
#include <cmath>

#include "ident/spectra/fft.h"

namespace hoverwright::ident {
namespace {

constexpr double kWeakestLine = 1e-2;  // of the maximum, for a line to be kept
constexpr double kWeakestStart =
    0.1;  // of the maximum, for the frequency the sweep starts from: its skirt reaches lower
constexpr Eigen::Index kFirstLine = 2;

std::optional<LineBand> around_maximum(const Eigen::VectorXd& level, Eigen::Index lowest, double weakest) {
  if (level.size() <= lowest) return std::nullopt;
  Eigen::Index peak = 0;
  const double maximum = level.tail(level.size() - lowest).maxCoeff(&peak);
  if (!(maximum > 0.0)) return std::nullopt;
  LineBand band{peak + lowest, peak + lowest};
  while (band.first > lowest && level[band.first - 1] > weakest * maximum) --band.first;
  while (band.last + 1 < level.size() && level[band.last + 1] > weakest * maximum) ++band.last;
  return band;
}

}  // namespace

std::optional<LineBand> excited_lines(const Eigen::VectorXd& energy) {
  Eigen::VectorXd level(energy.size());
  for (Eigen::Index m = 0; m < energy.size(); ++m) level[m] = static_cast<double>(m) * energy[m];
  return around_maximum(level, kFirstLine, kWeakestLine);
}

std::optional<double> lowest_excited_hz(const std::vector<RecordSignals>& records, double sample_rate_hz) {
  const auto longest = std::max_element(
      records.begin(), records.end(),
      [](const auto& left, const auto& right) { return left.excitation.size() < right.excitation.size(); });
  if (longest == records.end() || longest->excitation.size() < 2) return std::nullopt;
  const Eigen::Index length = longest->excitation.size();
  RealFft fft(length);
  const Eigen::VectorXd energy =
      fft.transform(longest->excitation.array() - longest->excitation.mean()).cwiseAbs2();
  Eigen::VectorXd level = Eigen::VectorXd::Zero(energy.size());
  const double half_band = std::exp2(1.0 / 6.0);
  for (Eigen::Index m = 1; m < energy.size(); ++m) {
    const auto low = static_cast<Eigen::Index>(std::ceil(static_cast<double>(m) / half_band));
    const auto high =
        std::min(energy.size() - 1, static_cast<Eigen::Index>(static_cast<double>(m) * half_band));
    level[m] = static_cast<double>(m) * energy.segment(low, high - low + 1).mean();
  }
  const std::optional<LineBand> band = around_maximum(level, 1, kWeakestStart);
  if (!band) return std::nullopt;
  return static_cast<double>(band->first) * sample_rate_hz / static_cast<double>(length);
}

}  // namespace hoverwright::ident
