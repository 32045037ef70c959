// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <filesystem>
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "ident/fitting/model_fit.h"
#include "ident/fitting/validation.h"
#include "ident/loops/recommend.h"
#include "ident/spectra/frequency_response.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::reports {

/// Where a result came from; written into every result file.
struct Provenance {
  std::string program_version;
  std::string command;                        ///< command name and options as given
  std::map<std::string, std::string> inputs;  ///< file name -> SHA-256
};

/// What `identify` found.
struct AxisResult {
  ident::FrequencyResponse response;
  ident::FeedbackBias feedback_bias;
  std::optional<ident::ModelFit> model;  ///< only converged fits
  std::string no_model_reason;           ///< why there is none, with what to do; empty if there is one
  std::vector<ident::ValidationResult> validation;
};
struct IdentifyResult {
  std::string vehicle_name;
  std::map<ident::Axis, AxisResult> axes;
  std::vector<std::string> warnings;  ///< most important first
};

/// What `gains` found.
struct GainsResult {
  std::string vehicle_name;
  std::map<ident::Axis, ident::AxisRecommendation> axes;
  ident::GainRequirements requirements;
  std::vector<std::string> warnings;
};

// The writers give the text of responses.json, models.json and gains.json (format tags
// hoverwright.responses/1, .models/1, .gains/1). Numbers are written so that they read back to the same
// double; one that is not finite is written as null and reads back as NaN. Writing and reading back gives the
// same values.
//
// responses.json, per axis: gain_db, phase_deg (unwrapped from the lowest trusted frequency), real, imag,
// variance, gain_std_db, phase_std_deg are for other programs and follow from `pair`, which carries a, b and
// their noise covariance; `coherence` is demand to output. models.json: axes without a model stand in
// `without_model` with the reason. gains.json: `loops` holds the recommended gains, `present` those flown; a
// loop not tuned has no entry in `loops`.
std::string responses_to_json(const IdentifyResult& result, const Provenance& provenance);
std::string models_to_json(const IdentifyResult& result, const Provenance& provenance);
std::string gains_to_json(const GainsResult& result, const Provenance& provenance);

/// Reads responses.json and, when it exists, models.json back into values (strict).
/// @throws Failure (bad_input) with file and JSON pointer; also when the two files are not from the same run.
IdentifyResult read_identify_result(const std::filesystem::path& responses,
                                    const std::filesystem::path& models);
GainsResult read_gains_result(const std::filesystem::path& gains);

/// Where the result file came from. @throws Failure (bad_input) as above.
Provenance read_provenance(const std::filesystem::path& result);

}  // namespace hoverwright::reports
