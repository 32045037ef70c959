// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

namespace hoverwright::excitation {

/// Exponential chirp. It is held at the lowest frequency f0 for a whole number of cycles, t in [0, T0] with
/// T0 = hold_cycles / f0, and swept over the remaining T = duration - T0 seconds:
///
///     hold   φ(t) = 2π f0 t
///     sweep  φ(t) = 2π hold_cycles + 2π f0 T / ln(f1/f0) ((f1/f0)^((t - T0)/T) - 1)
///     value  a w(t) sin φ(t)
///
/// Phase and instantaneous frequency φ'/2π are continuous at T0; the frequency reaches f1 at the end. w(t)
/// rises as (1 - cos(π t/fade_in))/2 over the first fade_in seconds, falls likewise over the last fade_out,
/// and is 1 between.
struct Chirp {
  double amplitude = 0.0;    ///< a, peak, normalised demand, > 0
  double low_hz = 0.0;       ///< f0 > 0
  double high_hz = 0.0;      ///< f1 > f0
  double duration_s = 0.0;   ///< hold, sweep and fades together
  double hold_cycles = 1.0;  ///< whole number >= 1
  double fade_in_s = 0.0;    ///< >= 0; 0 starts at once
  double fade_out_s = 0.0;   ///< >= 0; 0 stops at once

  /// @throws Failure (bad_input), `where` naming the member: a value that is not finite or outside its range
  /// above, or a duration that is not longer than hold and fades together.
  void check() const;
  /// Value at t seconds from the start; zero outside [0, duration_s].
  [[nodiscard]] double value(double t_s) const;
  /// Instantaneous frequency; low_hz during the hold. Zero outside [0, duration_s].
  [[nodiscard]] double frequency_hz(double t_s) const;
};

/// Linear chirp: instantaneous frequency f0 + (f1 - f0) t/T over the whole duration T, phase
/// 2π (f0 t + (f1 - f0) t²/(2T)), the same fades, no hold.
struct LinearChirp {
  double amplitude = 0.0;   ///< peak, normalised demand, > 0
  double low_hz = 0.0;      ///< f0 > 0
  double high_hz = 0.0;     ///< f1 > f0
  double duration_s = 0.0;  ///< T, longer than the two fades
  double fade_in_s = 0.0;   ///< >= 0
  double fade_out_s = 0.0;  ///< >= 0

  /// @throws Failure (bad_input) as Chirp::check.
  void check() const;
  /// Value at t seconds from the start; zero outside [0, duration_s].
  [[nodiscard]] double value(double t_s) const;
  /// Instantaneous frequency. Zero outside [0, duration_s].
  [[nodiscard]] double frequency_hz(double t_s) const;
};

}  // namespace hoverwright::excitation
