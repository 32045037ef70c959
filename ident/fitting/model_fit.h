// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "ident/models/structure.h"
#include "ident/spectra/frequency_response.h"

namespace hoverwright::ident {

enum class FitStatus {
  converged,
  not_converged,  ///< the optimiser stopped early; numbers are not to be used
  not_supported,  ///< the data cannot carry this structure; see reason
};

/// One fitted parameter. Interval: 95 %, Student t on the fitted scale (logarithm or value).
struct ParameterEstimate {
  std::string name;
  std::string unit;
  double value = 0.0;
  double standard_error = 0.0;
  double low = 0.0, high = 0.0;
  bool identifiable =
      true;  ///< false: the data do not see it (interval reaches zero or spans more than a factor of ten)
};

struct ModelFit {
  FitStatus status = FitStatus::not_converged;
  std::string reason;  ///< for every status but converged; empty otherwise
  std::string structure;
  double sample_rate_hz = 0.0;
  std::vector<ParameterEstimate> parameters;
  Eigen::MatrixXd covariance;         ///< of the values, order of `parameters`, their units
  Eigen::MatrixXd fitted_covariance;  ///< of the fitted scale (logarithm where the structure says so)
  double reduced_chi_square = 0.0;
  double residual_degrees_of_freedom = 0.0;  ///< with neighbouring lines' correlation counted
  double flight_variation =
      1.0;  ///< covariance inflation by disagreement over the flight, 1 where there is none
  int points = 0;
  int iterations = 0;
  double band_low_hz = 0.0, band_high_hz = 0.0;
  std::vector<std::string> warnings;

  [[nodiscard]] Eigen::VectorXd values() const;
  [[nodiscard]] const ParameterEstimate& parameter(
      const std::string& name) const;  ///< @throws Failure if absent
};

struct FitOptions {
  int max_iterations = 100;  ///< of each descent to a minimum (at most a few are made)
  double confidence = 0.95;
};

/// Maximum-likelihood fit with both spectra noisy: minimises Σ |a_k - H(θ) b_k|² / σ_k²(θ), σ_k² = [1,-H] C_k
/// [1,-H]*, the variance at the model and its derivative kept in the gradient (exact form J = dH · Û, Û = b -
/// c (a - H b)/σ², c = E[n_b conj(n_a - H n_b)]). H is the sampled response. Starts: grid over poles and
/// delay with the gain in closed form, poles ordered 1/motor_lag > damping. Levenberg-Marquardt with analytic
/// Jacobian. Covariance: sandwich with the carried correlation of neighbouring lines, Û in the information
/// matrix, times q/(q-2), times the reduced chi-square where it exceeds one (Pintelon & Schoukens, System
/// Identification: A Frequency Domain Approach, 2nd ed., ch. 9).
/// @throws Failure (unsupported) for a direct-only response; (bad_input) on inconsistent sizes.
ModelFit fit_model(const FrequencyResponse& response, const Structure& structure,
                   const FitOptions& options = {});

/// Value of the cost at given parameters (the sum above), for checks against other optimisers.
double fit_cost(const FrequencyResponse& response, const Structure& structure,
                const Eigen::VectorXd& parameters);

/// Joint draws of the parameters from the fit's normal approximation on the fitted scale (draws ×
/// parameters). Draws outside the structure's order (1/motor_lag <= damping) or with a negative delay are
/// redrawn. Same seed, same draws.
/// @throws Failure (unsupported) for a fit that did not converge.
Eigen::MatrixXd draw_parameters(const ModelFit& fit, int draws, std::uint64_t seed);

/// Pointwise 95 % band of gain and phase of the fitted (sampled) model, to first order in the parameters.
/// @throws Failure (unsupported) for a fit that did not converge.
struct ResponseBand {
  Eigen::VectorXd frequency_hz;
  Eigen::VectorXd gain_db, gain_low_db, gain_high_db;
  Eigen::VectorXd phase_deg, phase_low_deg, phase_high_deg;  ///< unwrapped from the lowest frequency
};
ResponseBand response_band(const ModelFit& fit, const Eigen::VectorXd& frequency_hz);

}  // namespace hoverwright::ident
