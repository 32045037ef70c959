// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <filesystem>
#include <optional>
#include <ostream>

#include "ident/flight_log/flight_data.h"
#include "reports/result_files.h"

namespace hoverwright::ident {

struct IdentifyOptions {
  std::filesystem::path study;
  std::optional<std::filesystem::path> log;  ///< default: the only file in study/logs
  TimeRange range;
  double low_hz = 0.0;          ///< lowest frequency used; 0: from the excitation
  double high_hz = 0.0;         ///< highest frequency used; 0: from the excitation
  double segment_s = 0.0;       ///< window length; 0: chosen from the records
  bool responses_only = false;  ///< do not ask for models
  bool json = false;  ///< print models.json (or responses.json with responses_only) instead of tables
};

/// Responses, models and validation of every axis of a mapped log. No files.
reports::IdentifyResult identify_flight(const FlightData& data, const Vehicle& vehicle,
                                        const IdentifyOptions& options);

/// Reads the study's vehicle file and the log, writes responses.json and models.json, prints a table per
/// axis.
/// @throws Failure (unsupported), after writing what there is, when an axis has no model though one was asked
/// for.
void run_identify(const IdentifyOptions& options, std::ostream& out);

}  // namespace hoverwright::ident
