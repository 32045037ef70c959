// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <vector>

#include "ident/models/structure.h"
#include "ident/spectra/frequency_response.h"

namespace hoverwright::ident {

/// A start for the fit: parameter values, and the cost of the fit there.
struct FitStart {
  Eigen::VectorXd values;
  double cost = 0.0;
};

/// Weights 1/var(a - Ĥ b) with the correlation of a and b left out: |b|² / (|b|² C_aa + |a|² C_bb). Never
/// near-infinite: with the correlation in, a noise-dominated point in closed loop would be (Ĥ →
/// -1/controller).
Eigen::VectorXd start_weights(const FrequencyResponse& points);

/// The `count` best points of a grid over poles (in order), zero and delay, which span the measured band; the
/// gain, its sign free, in closed form. Ranked by the cost of the fit.
std::vector<FitStart> start_grid(const FrequencyResponse& points, const Structure& structure,
                                 std::size_t count);

}  // namespace hoverwright::ident
