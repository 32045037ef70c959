// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/signals/chirp.h"

#include <fmt/format.h>

#include <cmath>
#include <numbers>

#include "excitation/signals/checks.h"

namespace hoverwright::excitation {
namespace {

using ident::Failure;
using ident::FailureKind;
using std::numbers::pi;

bool inside(double t_s, double duration_s) {
  return t_s >= 0.0 && t_s <= duration_s;
}

/// Raised-cosine fades: 0 at both ends, 1 between.
double fade(double t_s, double duration_s, double fade_in_s, double fade_out_s) {
  double weight = 1.0;
  if (t_s < fade_in_s) weight *= 0.5 * (1.0 - std::cos(pi * t_s / fade_in_s));
  const double left_s = duration_s - t_s;
  if (left_s < fade_out_s) weight *= 0.5 * (1.0 - std::cos(pi * left_s / fade_out_s));
  return weight;
}

/// What the two kinds of chirp ask for alike.
template <typename AnyChirp>
void check_common(const AnyChirp& chirp) {
  require_positive(chirp.amplitude, "amplitude");
  require_positive(chirp.low_hz, "low_hz");
  require_positive(chirp.high_hz, "high_hz");
  require_positive(chirp.duration_s, "duration_s");
  require_non_negative(chirp.fade_in_s, "fade_in_s");
  require_non_negative(chirp.fade_out_s, "fade_out_s");
  if (chirp.high_hz <= chirp.low_hz) {
    throw Failure(FailureKind::bad_input,
                  fmt::format("{} Hz is not above the lowest frequency, {} Hz", chirp.high_hz, chirp.low_hz),
                  "high_hz", "");
  }
}

void check_room(double duration_s, double hold_s, double fades_s) {
  if (duration_s > hold_s + fades_s) return;
  throw Failure(FailureKind::bad_input,
                fmt::format("{:.4g} s leave no time to sweep: hold and fades take {:.4g} s", duration_s,
                            hold_s + fades_s),
                "duration_s", "Make the chirp longer, its fades shorter or its lowest frequency higher.");
}

}  // namespace

void Chirp::check() const {
  check_common(*this);
  if (!std::isfinite(hold_cycles) || hold_cycles < 1.0 || hold_cycles != std::floor(hold_cycles)) {
    throw Failure(FailureKind::bad_input,
                  fmt::format("{} is not a whole number of cycles, 1 or more", hold_cycles), "hold_cycles",
                  "");
  }
  check_room(duration_s, hold_cycles / low_hz, fade_in_s + fade_out_s);
}

double Chirp::value(double t_s) const {
  if (!inside(t_s, duration_s)) return 0.0;
  const double hold_s = hold_cycles / low_hz;
  double phase_rad = 0.0;
  if (t_s < hold_s) {
    phase_rad = 2.0 * pi * low_hz * t_s;
  } else {
    // The hold is whole cycles, so its 2π hold_cycles drop out of the sine.
    const double sweep_s = duration_s - hold_s;
    const double log_ratio = std::log(high_hz / low_hz);
    phase_rad = 2.0 * pi * low_hz * sweep_s / log_ratio * std::expm1(log_ratio * (t_s - hold_s) / sweep_s);
  }
  return amplitude * fade(t_s, duration_s, fade_in_s, fade_out_s) * std::sin(phase_rad);
}

double Chirp::frequency_hz(double t_s) const {
  if (!inside(t_s, duration_s)) return 0.0;
  const double hold_s = hold_cycles / low_hz;
  if (t_s < hold_s) return low_hz;
  return low_hz * std::pow(high_hz / low_hz, (t_s - hold_s) / (duration_s - hold_s));
}

void LinearChirp::check() const {
  check_common(*this);
  check_room(duration_s, 0.0, fade_in_s + fade_out_s);
}

double LinearChirp::value(double t_s) const {
  if (!inside(t_s, duration_s)) return 0.0;
  const double phase_rad = 2.0 * pi * (low_hz * t_s + (high_hz - low_hz) * t_s * t_s / (2.0 * duration_s));
  return amplitude * fade(t_s, duration_s, fade_in_s, fade_out_s) * std::sin(phase_rad);
}

double LinearChirp::frequency_hz(double t_s) const {
  if (!inside(t_s, duration_s)) return 0.0;
  return low_hz + (high_hz - low_hz) * t_s / duration_s;
}

}  // namespace hoverwright::excitation
