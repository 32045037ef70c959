// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <optional>
#include <vector>

#include "ident/spectra/overlapped_windows.h"

namespace hoverwright::ident {

/// Lines first..last, both included.
struct LineBand {
  Eigen::Index first = 0, last = 0;
};

/// Contiguous lines around the maximum of m · energy[m] in which it exceeds a hundredth of its maximum: a
/// sweep that spends equal time per octave has energy ∝ 1/f and must not look weak at its upper end. Lines 0
/// and 1 are never taken (the mean is removed there, and the window's main lobe reaches over them). Nothing
/// when no line has energy.
std::optional<LineBand> excited_lines(const Eigen::VectorXd& energy);

/// Frequency the excitation of the longest record starts from: the lower end of the band in which frequency
/// times energy spectrum, averaged over a third of an octave, exceeds a tenth of its maximum. The quiet ends
/// of a record make a window unnecessary.
std::optional<double> lowest_excited_hz(const std::vector<RecordSignals>& records, double sample_rate_hz);

}  // namespace hoverwright::ident
