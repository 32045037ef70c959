// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include "reports/result_files.h"
#include "reports/result_json.h"

// The readers of the single files, joined in result_files.cpp.

namespace hoverwright::reports {

IdentifyResult read_responses(ResultObject file, Provenance& provenance);
/// Adds the models (and the reasons for those that are missing) to `result`; refuses a file of another run.
void read_models(ResultObject file, const Provenance& responses_provenance, IdentifyResult& result);
GainsResult read_gains(ResultObject file);

/// The axis a key of `axes` names. @throws Failure (bad_input) listing the four names.
ident::Axis axis_of(const ResultObject& axes, const std::string& name);

}  // namespace hoverwright::reports
