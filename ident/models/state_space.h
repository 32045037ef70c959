// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>

#include "ident/models/transfer_function.h"

namespace hoverwright::ident {

/// ẋ = A x + B u, y = C x + D u; the delay is kept apart.
struct StateSpace {
  Eigen::MatrixXd a, b, c, d;
  double input_delay_s = 0.0;
};

/// Controllable form of a proper transfer function with real coefficients. @throws Failure (internal_error)
/// if improper.
StateSpace state_space(const TransferFunction& transfer_function);

/// x[k+1] = A x[k] + B u[k], y[k] = C x[k] + D u[k].
struct SampledStateSpace {
  Eigen::MatrixXd a, b, c, d;
  double sample_rate_hz = 0.0;

  /// C (zI - A)⁻¹ B + D at z = exp(j2πf/rate).
  [[nodiscard]] Eigen::MatrixXcd response(double frequency_hz) const;
};

/// Exact zero-order-hold equivalent with any fraction of a sample in the input delay τ = system.input_delay_s
/// > -Δ (delay states appended; Åström & Wittenmark, Computer-Controlled Systems, ch. 2). The hold itself is
/// modelled here, so the total delay of an axis model enters as τ = delay - Δ/2; where that is negative the
/// output is taken -τ after each sample.
/// @throws Failure (bad_input) for τ <= -Δ or a rate that is not positive, (internal_error) on matrix sizes
/// that disagree.
SampledStateSpace sample_with_hold(const StateSpace& system, double sample_rate_hz);

/// Output (samples × outputs) from zero initial state for input (samples × inputs).
Eigen::MatrixXd simulate(const SampledStateSpace& system, const Eigen::Ref<const Eigen::MatrixXd>& input);

}  // namespace hoverwright::ident
