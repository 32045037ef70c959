// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

namespace hoverwright::excitation {

/// +amplitude for half the duration, then -amplitude; zero outside [0, duration_s).
///
/// Which side of an edge a time belongs to is decided with 1 ns of slack, so that samples whose times are
/// computed as k/rate (rounded by some 1e-13 s) always fall into the half that is meant and both halves hold
/// equally many.
struct Doublet {
  double amplitude = 0.0;   ///< normalised demand, > 0
  double duration_s = 0.0;  ///< > 0

  /// @throws Failure (bad_input), `where` naming the member, when one is not finite and positive.
  void check() const;
  /// Value at t seconds from the start.
  [[nodiscard]] double value(double t_s) const;
};

}  // namespace hoverwright::excitation
