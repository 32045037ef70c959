// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <optional>
#include <string>

#include "reports/result_files.h"

// The parts of the report page, as HTML.

namespace hoverwright::reports {

std::string title_block(const std::string& vehicle_name, const Provenance& provenance);
std::string warnings_section(const IdentifyResult& identified, const std::optional<GainsResult>& gains);
std::string cautions_section();
std::string summary_section(const IdentifyResult& identified, const std::optional<GainsResult>& gains);
std::string axis_section(ident::Axis axis, const AxisResult& result);
std::string gains_section(const std::optional<GainsResult>& gains);
std::string bring_up_section(const std::optional<GainsResult>& gains);

/// Steps from the present gains to the recommended ones: every gain changes by the same factor each step,
/// none by more than 30 %.
struct GainSteps {
  int steps = 0;
  std::optional<double> kp_factor, ki_factor,
      kd_factor;  ///< per step; absent where the gain is zero now or then
};
GainSteps gain_steps(const ident::LoopGains& present, const ident::LoopGains& recommended);

/// Small drawing of the craft with the axis' motion.
std::string axis_emblem(ident::Axis axis);

/// Mark for a requirement: words and shape differ, so that it survives a black-and-white print.
std::string met_mark(bool met);

/// "6.4 dB, 5.9 … 7.0" style cell of a margin, with a small strip that shows the range against the
/// requirement.
struct MarginScale {
  double low, high;  ///< ends of the strip
  double required;
  bool smaller_is_better;
  int decimals;
  const char* unit;
};
std::string margin_cell(const std::optional<ident::Range>& range, const MarginScale& scale);

}  // namespace hoverwright::reports
