// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include "ident/fitting/model_fit.h"

namespace hoverwright::ident {

/// @throws Failure (unsupported) with the fit's reason unless it converged; (bad_input) when its sizes do not
/// agree.
void require_usable(const ModelFit& fit);

}  // namespace hoverwright::ident
