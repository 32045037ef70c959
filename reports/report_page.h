// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <optional>
#include <string>

#include "reports/result_files.h"

namespace hoverwright::reports {

/// The review page: one self-contained HTML file with uPlot, script, style and data embedded; opens without
/// network. Warnings first, then per axis: response points with error bars, coherence, fitted model with
/// band, parameters with intervals, time validation, margins now and recommended.
std::string report_html(const IdentifyResult& identified, const std::optional<GainsResult>& gains,
                        const Provenance& provenance);

}  // namespace hoverwright::reports
