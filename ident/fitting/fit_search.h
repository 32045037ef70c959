// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <optional>

#include "ident/fitting/fitted_scale.h"
#include "ident/spectra/frequency_response.h"

namespace hoverwright::ident {

/// Where the search for the least cost ended.
struct FitSearch {
  bool converged = false;
  FittedScale scale;
  Eigen::VectorXd fitted;
  double cost = 0.0;
  int iterations = 0;
  /// The delay at which the cost has a corner and its minimum: zero (the limit) or a whole sample behind the
  /// hold, where the derivative of the sampled response jumps.
  std::optional<double> delay_held_at;
};

/// Grid of starts; from the best of them a fit with fixed weights, twice renewed at the model, to get near;
/// then maximum likelihood from the better end. Empty if no start has a finite cost.
std::optional<FitSearch> search_fit(const FrequencyResponse& points, const Structure& structure,
                                    int max_iterations);

}  // namespace hoverwright::ident
