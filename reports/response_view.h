// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <optional>
#include <vector>

#include "ident/spectra/frequency_response.h"

namespace hoverwright::reports {

/// 95 % limits of one point's gain and phase, from the Fieller region of its pair.
struct PointLimits {
  bool bounded = false;                        ///< false: the data bound neither gain nor phase here
  std::optional<double> gain_low_db;           ///< absent: the region holds zero gain, or is unbounded
  std::optional<double> gain_high_db;          ///< absent: unbounded
  std::optional<double> phase_half_width_deg;  ///< absent: any phase is possible
  [[nodiscard]] bool trusted() const { return bounded && phase_half_width_deg.has_value(); }
};

/// What plots and files show of a response; every vector has one entry per frequency. NaN where Ĥ itself is
/// not finite.
struct ResponseView {
  Eigen::VectorXcd response;  ///< Ĥ = a/b
  Eigen::VectorXd gain_db;    ///< 20 log10 |Ĥ|
  /// Unwrapped upwards from the lowest trusted point (phase known at 95 %); a point whose phase is not known
  /// is put on the branch nearest to the trusted point before it, so that noise cannot carry the branch away.
  Eigen::VectorXd phase_deg;
  /// First order, for a circular error of variance v: half of v along Ĥ, half across it.
  Eigen::VectorXd gain_std_db;    ///< 20/ln 10 sqrt(v/2)/|Ĥ|
  Eigen::VectorXd phase_std_deg;  ///< sqrt(v/2)/|Ĥ|, in degrees
  Eigen::VectorXd variance;
  std::vector<PointLimits> limits;
  Eigen::VectorXd direct_gain_db;    ///< empty when there is no direct estimate beside it
  Eigen::VectorXd direct_phase_deg;  ///< on the branch nearest to phase_deg
};

ResponseView view_response(const ident::FrequencyResponse& response);

/// The angle `phase_deg` + 360 n nearest to `reference_deg`.
double nearest_branch_deg(double phase_deg, double reference_deg);

/// Larger of the two distances, in dB, from the estimate to its 95 % limits; absent when a limit is.
std::optional<double> gain_half_width_db(const ResponseView& view, Eigen::Index point);

struct FrequencyBand {
  double low_hz = 0.0, high_hz = 0.0;
};

/// Longest run of frequencies over which the running median (9 points) of gain_half_width_db stays within
/// `half_width_db`; points without limits count as wider. Absent when there is none of at least 3 points.
std::optional<FrequencyBand> band_known_within(const ResponseView& view, const Eigen::VectorXd& frequency_hz,
                                               double half_width_db);

/// Longest run over which the running median (9 points) of `values` is at least `level`.
std::optional<FrequencyBand> band_above(const Eigen::VectorXd& values, const Eigen::VectorXd& frequency_hz,
                                        double level);

}  // namespace hoverwright::reports
