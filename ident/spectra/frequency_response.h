// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <array>
#include <complex>
#include <string>
#include <vector>

namespace hoverwright::ident {

/// Covariance of the noise (n_a, n_b) of one pair: E|n_a|², E|n_b|², E[n_a conj(n_b)]; circular complex.
struct PairNoise {
  double aa = 0.0;
  double bb = 0.0;
  std::complex<double> ab{};

  /// Variance of a - H b: [1, -H] C [1, -H]*.
  [[nodiscard]] double variance_of_error(std::complex<double> response) const {
    return aa + std::norm(response) * bb - 2.0 * std::real(std::conj(response) * ab);
  }
};

/// What one stretch of flight time (about one window long) adds to the pairs: the stretches of a response sum
/// to its a and b. Lets the fit see whether the vehicle stayed the same over the flight.
struct ResponseStretch {
  int record = 0;  ///< stretches of one record are consecutive in time
  Eigen::VectorXcd a, b;
};

/// Frequency response of one axis, output over demand, Fourier convention exp(-jωt), on a rising frequency
/// grid (not quite even where an estimator places its points where the excitation's energy lies).
///
/// With an excitation r logged (`reference_based`), each point is the pair a = G_yr, b = G_ur of output and
/// demand referred to r, and the response is a/b: unbiased under feedback and disturbances (Wellstead, Int.
/// J. Control 1981; Ljung, System Identification, 2nd ed., ch. 13). Without it the pair is a = S_yu/S_uu, b =
/// 1 with noise in a only (the direct estimate): feedback biases it and `noise` does not tell.
struct FrequencyResponse {
  bool reference_based = true;
  std::string method;    ///< estimator, in words
  std::string settings;  ///< segment length, overlap, ..., in words
  int records = 0;
  double sample_rate_hz = 0.0;
  double segments = 0.0;  ///< windows averaged

  Eigen::VectorXd frequency_hz;
  Eigen::VectorXcd a;
  Eigen::VectorXcd b;
  std::vector<PairNoise> noise;
  /// Complex degrees of freedom q of `noise`: quadratic forms follow F(2, 2q).
  Eigen::VectorXd degrees_of_freedom;
  /// Correlation E[n_k conj(n_{k+d})] / sqrt(var_k var_{k+d}) of the noise of neighbouring lines, d = 1, 2.
  /// Entry k of element d-1; the last d entries are zero.
  std::array<Eigen::VectorXcd, 2> neighbour_correlation;

  /// Empty where the estimator does not split its estimate in time, and after reading from a file.
  std::vector<ResponseStretch> stretches;

  Eigen::VectorXd coherence_ry;  ///< excitation to output; empty without excitation
  Eigen::VectorXd coherence_ru;  ///< excitation to demand; empty without excitation
  Eigen::VectorXd coherence_uy;  ///< demand to output

  Eigen::VectorXcd direct;          ///< S_yu / S_uu beside it, always
  Eigen::VectorXd direct_variance;  ///< E|direct - its mean|² (its bias not included)

  /// One-sided power spectral density of the output noise (not caused by r), (output unit)²/Hz.
  Eigen::VectorXd output_noise_psd;

  [[nodiscard]] Eigen::Index points() const { return frequency_hz.size(); }
  /// Ĥ = a / b.
  [[nodiscard]] Eigen::VectorXcd response() const;
  /// E|Ĥ - H|² to first order: [1, -Ĥ] C [1, -Ĥ]* / |b|².
  [[nodiscard]] Eigen::VectorXd variance() const;
};

/// Where the direct estimate leaves the joint 95 % band of both, for the warning.
struct FeedbackBias {
  bool present = false;
  double low_hz = 0.0, high_hz = 0.0;  ///< band in which most of the excess lies
  double median_difference = 0.0;      ///< |direct - reference| / |reference| over that band
};

/// Compares direct and reference-based estimate line by line over sliding groups of lines; a group counts
/// when its mean squared, variance-scaled difference is beyond the point that one response in a hundred
/// without bias would reach somewhere. Differences below 1 % are not reported, nor anything for a direct-only
/// response.
FeedbackBias find_feedback_bias(const FrequencyResponse& response);

}  // namespace hoverwright::ident
