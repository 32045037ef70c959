// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <optional>

#include "ident/fitting/levenberg_marquardt.h"
#include "ident/spectra/frequency_response.h"

namespace hoverwright::ident {

/// How well fitted parameters are known.
struct FitUncertainty {
  Eigen::MatrixXd covariance;  ///< on the fitted scale
  double reduced_chi_square = 0.0;
  double residual_degrees_of_freedom = 0.0;
  double interval_degrees_of_freedom = 0.0;  ///< for Student's t
  double flight_variation = 1.0;             ///< see flight_variation.h; in `covariance` already
};

/// Sandwich covariance A⁻¹ M A⁻¹ at the optimum, A = Re(Jᴴ J), M the covariance of the gradient with the
/// correlation of neighbouring lines counted; every line's share of M times q/(q-2) for its estimated noise
/// (Pintelon & Schoukens, System Identification: A Frequency Domain Approach, 2nd ed., ch. 9); times the
/// reduced chi-square where that exceeds one, or times the variation over the flight (flight_variation.h) if
/// that is larger. Reduced chi-square: Σ|r|² (1 - 1/q) over its expectation N - tr(A⁻¹ M), since E[σ²/σ̂²] =
/// q/(q-1). Correlation leaves this mean as it is but widens its spread: Var Σ|r|² = Σ_kl |ρ_kl|², so the
/// degrees of freedom are 2 (N - tr) N / Σ|ρ_kl|². Empty when the points do not determine the parameters (A
/// singular, or A⁻¹ M A⁻¹ not positive).
///
/// Degrees of freedom for the intervals: those of the residual while the noise explains everything, fewer as
/// the inflation κ, known from few stretches, takes over: κ² / (1/ν_residual + (κ - 1)²/ν_κ) after
/// Satterthwaite (Biometrics Bull. 1946). `model` is H at the optimum.
std::optional<FitUncertainty> fit_uncertainty(const FrequencyResponse& points, const Linearisation& optimum,
                                              const Eigen::VectorXcd& model);

/// Two-sided Student t factor for an interval of this confidence.
double student_t(double confidence, double degrees_of_freedom);

}  // namespace hoverwright::ident
