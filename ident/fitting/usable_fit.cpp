// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/usable_fit.h"

#include "ident/failure.h"

namespace hoverwright::ident {

void require_usable(const ModelFit& fit) {
  if (fit.status != FitStatus::converged)
    throw Failure(FailureKind::unsupported, fit.reason.empty() ? "the fit did not converge" : fit.reason,
                  fit.structure, "");
  const auto count = Structure::find(fit.structure).parameters().size();
  const auto size = static_cast<Eigen::Index>(count);
  if (fit.parameters.size() != count || fit.fitted_covariance.rows() != size ||
      fit.fitted_covariance.cols() != size)
    throw Failure(FailureKind::bad_input, "parameters and covariance of the fit have different sizes",
                  fit.structure, "");
}

}  // namespace hoverwright::ident
