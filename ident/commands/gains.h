// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <filesystem>
#include <ostream>

#include "ident/vehicle/vehicle.h"
#include "reports/result_files.h"

namespace hoverwright::ident {

struct GainsOptions {
  std::filesystem::path study;
  GainRequirements requirements;
  bool json = false;  ///< print gains.json instead of tables
};

/// Margins of the present gains and recommended gains for every axis that has a model. No files.
reports::GainsResult recommend_gains(const reports::IdentifyResult& identified, const Vehicle& vehicle,
                                     const GainRequirements& requirements);

/// The present gains with the recommended ones put in.
LoopGainSet recommended_gain_set(const Vehicle& vehicle, const reports::GainsResult& result);

/// Reads vehicle.json, responses.json and models.json of the study, writes gains.json, prints a table per
/// axis.
/// @throws Failure (unsupported) when no axis has a model.
void run_gains(const GainsOptions& options, std::ostream& out);

}  // namespace hoverwright::ident
