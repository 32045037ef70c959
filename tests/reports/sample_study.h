// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include "reports/result_files.h"

// A study made up for the tests of the reports, with the size and shape of a real one: the responses are
// computed from first-order axis formulas and a plain rate loop, plus seeded noise; nothing of the
// estimators, the fit or the recommender is used.

namespace hoverwright::tests {

struct SampleOptions {
  bool direct_only = false;
  bool with_models = true;
  bool with_validation = true;
};

reports::IdentifyResult sample_identify(const SampleOptions& options = {});
reports::GainsResult sample_gains();
reports::Provenance sample_provenance();

}  // namespace hoverwright::tests
