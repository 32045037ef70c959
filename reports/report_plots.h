// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <string>
#include <vector>

#include "reports/response_view.h"
#include "reports/result_files.h"

namespace hoverwright::reports {

/// Points drawn: the first, then each next one at least 1/16 octave higher. Overlapping windows
/// make neighbouring lines nearly repeat each other, and more bars than this would hide one another. The
/// files hold all of them.
std::vector<Eigen::Index> drawn_points(const Eigen::VectorXd& frequency_hz);

/// Model line and band over the fitted band, moved by a multiple of 360° to the branch of the measured phase.
ident::ResponseBand drawn_band(const AxisResult& result, const ResponseView& view);

/// Data of all plots of the page as JSON: one object per axis, see report.js for its use.
std::string plot_data(const IdentifyResult& identified);

}  // namespace hoverwright::reports
