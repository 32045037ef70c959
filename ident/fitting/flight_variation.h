// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>

#include "ident/fitting/levenberg_marquardt.h"
#include "ident/spectra/frequency_response.h"

namespace hoverwright::ident {

/// Whether the stretches of flight time agree with one model as closely as their noise allows.
struct FlightVariation {
  double inflation = 1.0;           ///< of the covariance; 1 when the stretches agree, or cannot tell
  double degrees_of_freedom = 0.0;  ///< of `inflation`; 0 when the stretches cannot tell
};

/// A vehicle whose gain wanders with gusts shifts many neighbouring lines together: the residual line by line
/// hardly sees it, the parameters do. So each stretch i is asked for its own share of the gradient,
///   g_i = Re Jᴴ (a_i - H b_i)/σ,  Σ g_i = 0 at the optimum,
/// and the sum over stretches and their neighbours in time (windows overlap) Σ_{|i-j|<=1} g_i g_jᵀ, which
/// estimates the gradient's covariance whatever made it (Newey & West, Econometrica 1987, with lag one and no
/// taper), is compared with the covariance M that the noise explains:
///   inflation = tr(M⁻¹ Σ g_i g_jᵀ) / (p - Σ_{|i-j|<=1} tr(A⁻¹ A_i A⁻¹ A_j)),
/// A_i = Re Jᴴ (dH b_i)/σ the stretch's share of the information A; the sum in the denominator is what
/// fitting the p parameters took out. One number for all parameters: with some
/// ten stretches a full matrix would itself be noise. Where a single parameter wanders the others dilute it,
/// and its interval stays somewhat narrow (the test of this room has the figure). Degrees of freedom:
/// (stretches · p / 3) times the share left by the fit, the 3 for the two neighbours' products.
FlightVariation flight_variation(const FrequencyResponse& points, const Linearisation& optimum,
                                 const Eigen::VectorXcd& model, const Eigen::MatrixXd& gradient_covariance);

}  // namespace hoverwright::ident
