// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <optional>

namespace hoverwright::ident {

/// Margins of one loop gain L(jω), negative feedback, read between the lowest and highest grid frequency
/// only: nothing is extrapolated. A margin that has no crossing in the band is absent, not a number.
struct Margins {
  bool stable = false;                      ///< from the closed loop's discrete poles, never from a crossing
  std::optional<double> gain_margin_db;     ///< smallest increase of gain to the border, over all -180°
                                            ///< crossings with |L| < 1
  std::optional<double> gain_reduction_db;  ///< smallest decrease (as a positive number), -180° crossings
                                            ///< with |L| > 1
  /// Over all gain crossings, each in (-180, 180]. Stable loop: the smallest change of phase, lag or lead,
  /// that reaches the border, as a positive number. Unstable loop: the smallest value as read, usually
  /// negative.
  std::optional<double> phase_margin_deg;
  std::optional<double> delay_margin_s;  ///< smallest extra delay over all gain crossings; stable loops only
  double sensitivity_peak = 0.0;         ///< max |1/(1+L)|, refined between grid points
  std::optional<double> crossover_hz;    ///< highest gain crossing from above
  std::optional<double> phase_crossover_hz;  ///< where gain_margin_db is read
};

/// Reads the margins from samples of L on a dense rising grid: between neighbours, log |L| and the unwrapped
/// phase are taken as linear in log frequency. The grid must be dense enough that the phase turns by less
/// than 180° between neighbours. `stable` is copied. @throws Failure (bad_input) on size mismatch, fewer than
/// 3 points, a grid that does not rise from above zero, or a loop gain that is not finite.
Margins read_margins(const Eigen::VectorXd& frequency_hz, const Eigen::VectorXcd& loop_gain, bool stable);

/// Crossings of the real axis left of -1 along the grid, anticlockwise ones minus clockwise ones. Two loops
/// with the same number of unstable open-loop poles and the same low-frequency asymptote have the same number
/// of unstable closed-loop poles exactly when their counts agree (Nyquist's criterion). Same conditions on
/// the grid as above, not checked.
int turns_around_minus_one(const Eigen::VectorXcd& loop_gain);

}  // namespace hoverwright::ident
