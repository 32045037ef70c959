// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <vector>

#include "ident/fitting/model_fit.h"

namespace hoverwright::ident {

/// One record the fit never saw: the model is driven by the logged demand.
struct ValidationResult {
  Eigen::VectorXd time_s;    ///< from the record's start
  Eigen::VectorXd measured;  ///< output, its mean removed
  Eigen::VectorXd
      simulated;  ///< with the fitted offset, drift and free response; the mean of the output removed
  double fit_percent = 0.0;  ///< 100 (1 - |y - ŷ| / |y - mean y|)
  double theil_inequality =
      0.0;  ///< rms(y - ŷ) / (rms y + rms ŷ) (Theil, Economic Forecasts and Policy, 1961): 0 exact, 1 useless
};

/// Simulates with exact hold and delay; offset, drift and the free response to the unknown initial state are
/// fitted to the measured output by least squares and added.
/// @throws Failure (bad_input) when sizes differ, the record is shorter than twice the unknowns or does not
/// move; (unsupported) for a fit that did not converge.
ValidationResult validate(const ModelFit& fit, const Eigen::VectorXd& demand, const Eigen::VectorXd& output);

}  // namespace hoverwright::ident
