// SPDX-License-Identifier: GPL-3.0-or-later
#include <algorithm>
#include <cmath>

#include "ident/spectra/excited_band.h"
#include "ident/spectra/overlapped_windows.h"

namespace hoverwright::ident {
namespace {

/// Largest multiple of four up to `limit` without prime factors above seven.
Eigen::Index fast_length(Eigen::Index limit) {
  for (Eigen::Index candidate = limit - limit % 4; candidate > 4; candidate -= 4) {
    Eigen::Index rest = candidate;
    for (const Eigen::Index factor : {2, 3, 5, 7}) {
      while (rest % factor == 0) rest /= factor;
    }
    if (rest == 1) return candidate;
  }
  return 4;
}

}  // namespace

Eigen::Index choose_segment_length(const std::vector<RecordSignals>& records,
                                   const OverlappedWindowsOptions& options) {
  Eigen::Index samples = 0;
  for (const RecordSignals& record : records) samples = std::max(samples, record.output.size());
  const double longest_s = static_cast<double>(samples) / options.sample_rate_hz;
  const bool referred = !records.empty() && records.front().excitation.size() > 0;

  double low_hz = options.low_hz;
  if (!(low_hz > 0.0) && referred) low_hz = lowest_excited_hz(records, options.sample_rate_hz).value_or(0.0);

  // A fifth of the longest record, but with the lowest frequency two and a half to three lines above zero: it
  // must clear the window's main lobe around zero, and longer windows only have more of their first half
  // before the sweep starts. A third of the longest record at most, whatever the frequency.
  double window_s = longest_s / 5.0;
  if (low_hz > 0.0) {
    window_s = std::clamp(window_s, 2.5 / low_hz, 3.0 / low_hz);
  } else {
    window_s = std::min(longest_s / 8.0,
                        10.0);  // no excitation: 0.1 Hz resolves a craft's lowest modes, the rest averages
  }
  window_s = std::min(window_s, longest_s / 3.0);
  // Windows that fill the record: K of them a quarter apart take (K + 3)/4 window lengths.
  const double count = std::max(1.0, std::round(4.0 * longest_s / window_s - 3.0));
  return fast_length(static_cast<Eigen::Index>(4.0 * static_cast<double>(samples) / (count + 3.0)));
}

}  // namespace hoverwright::ident
