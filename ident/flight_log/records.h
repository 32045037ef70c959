// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <vector>

#include "ident/flight_log/flight_data.h"

namespace hoverwright::ident {

enum class RecordKind {
  sweep,    ///< excitation that varies continuously: used for the estimate
  doublet,  ///< piecewise constant excitation: kept for validation, never used in the fit
};

/// A stretch of the log in which one axis is excited. Sample indices, half open.
struct Record {
  Axis axis = Axis::roll;
  RecordKind kind = RecordKind::sweep;
  Eigen::Index first = 0;       ///< first excited sample
  Eigen::Index last = 0;        ///< one past the last excited sample
  Eigen::Index span_first = 0;  ///< with the quiet trim before
  Eigen::Index span_last = 0;   ///< with the quiet trim after; spans of different records do not overlap
};

/// Records from the excitation channels alone, in time order: runs in which |r| exceeds 1e-6 of its largest
/// value, joined over pauses shorter than 0.5 s, dropped when shorter than 0.25 s. Stretches whose rms over
/// half a second stays below 1e-4 of the axis's largest value are quiet too (residue of an unused channel).
/// Where several axes are excited at once, the samples belong to the one whose excitation, as a share of its
/// largest value, has the most energy over the surrounding half second. A run is a doublet when most of its
/// non-zero samples lie in constant stretches of at least 0.04 s (a sweep played back at 25 Hz or more is
/// none). The quiet trim taken along is at most 3 s and reaches half way to the neighbours.
std::vector<Record> find_records(const FlightData& data);

}  // namespace hoverwright::ident
