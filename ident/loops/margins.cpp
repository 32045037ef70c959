// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/margins.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <complex>
#include <limits>
#include <numbers>

#include "ident/failure.h"

namespace hoverwright::ident {
namespace {

using std::numbers::pi;
using Complex = std::complex<double>;

/// One step of the grid: log |L| and phase at its ends; the phase at the far end continues from the near one.
struct Step {
  double log_frequency, log_frequency_step;
  double log_gain, log_gain_step;
  double phase, phase_step;

  Step(double f0, double f1, Complex l0, Complex l1)
      : log_frequency(std::log(f0)),
        log_frequency_step(std::log(f1 / f0)),
        log_gain(std::log(std::abs(l0))),
        log_gain_step(std::log(std::abs(l1)) - log_gain),
        phase(std::arg(Complex(l0.real(), l0.imag() + 0.0))),  // -0 becomes 0: the axis itself is π
        phase_step(std::arg(l1 / l0)) {}

  [[nodiscard]] double frequency_hz(double share) const {
    return std::exp(log_frequency + share * log_frequency_step);
  }
};

/// |z|², which decides gain crossings without a square root.
double power(Complex z) {
  return std::norm(z);
}

void keep_smallest(std::optional<double>& kept, double value) {
  if (!kept || value < *kept) kept = value;
}

double in_decibels(double log_gain) {
  return 20.0 * std::numbers::log10e * log_gain;
}

void read_gain_crossing(const Step& step, bool falling, Margins& margins) {
  const double share = -step.log_gain / step.log_gain_step;
  const double frequency = step.frequency_hz(share);
  // Angle from the negative real axis, in (-π, π].
  const double above = pi + step.phase + share * step.phase_step;
  const double angle = above - 2.0 * pi * std::ceil((above - pi) / (2.0 * pi));
  keep_smallest(margins.phase_margin_deg, (margins.stable ? std::abs(angle) : angle) * 180.0 / pi);
  if (margins.stable) {
    const double lag = angle > 0.0 ? angle : angle + 2.0 * pi;
    keep_smallest(margins.delay_margin_s, lag / (2.0 * pi * frequency));
  }
  if (falling && (!margins.crossover_hz || frequency > *margins.crossover_hz))
    margins.crossover_hz = frequency;
}

void read_phase_crossing(const Step& step, double share, Margins& margins) {
  const double log_gain = step.log_gain + share * step.log_gain_step;
  if (log_gain > 0.0) {
    keep_smallest(margins.gain_reduction_db, in_decibels(log_gain));
  } else if (!margins.gain_margin_db || -in_decibels(log_gain) < *margins.gain_margin_db) {
    margins.gain_margin_db = -in_decibels(log_gain);
    margins.phase_crossover_hz = step.frequency_hz(share);
  }
}

/// Where on the step the negative real axis is crossed, or nothing. Only asked when the imaginary part
/// changes sign, so the phase passes a multiple of π; it is the negative axis when that multiple is ±π.
std::optional<double> share_at_negative_axis(const Step& step) {
  const double target = step.phase_step > 0.0 ? pi : -pi;
  const double share = (target - step.phase) / step.phase_step;
  if (share < 0.0 || share > 1.0) return std::nullopt;
  return share;
}

/// Smallest |1 + L|² near grid point k: where L runs straight between neighbours it is a parabola of the grid
/// index.
double between_points(const Eigen::VectorXcd& loop_gain, Eigen::Index k) {
  const double here = power(1.0 + loop_gain[k]);
  if (k == 0 || k + 1 == loop_gain.size()) return here;
  const double before = power(1.0 + loop_gain[k - 1]), after = power(1.0 + loop_gain[k + 1]);
  const double curvature = before - 2.0 * here + after, slope = after - before;
  if (!(curvature > 0.0)) return here;
  const double lowest = here - slope * slope / (8.0 * curvature);
  return lowest > 0.0 ? lowest : here;
}

void check_grid(const Eigen::VectorXd& frequency_hz, const Eigen::VectorXcd& loop_gain) {
  if (frequency_hz.size() != loop_gain.size() || frequency_hz.size() < 3)
    throw Failure(
        FailureKind::bad_input,
        fmt::format("{} frequencies and {} loop gain values; margins need the same number, at least 3",
                    frequency_hz.size(), loop_gain.size()),
        "loop gain", "");
  if (!loop_gain.allFinite())
    throw Failure(FailureKind::bad_input, "the loop gain is not finite everywhere", "loop gain", "");
  for (Eigen::Index k = 0; k < frequency_hz.size(); ++k) {
    if (!(frequency_hz[k] > (k == 0 ? 0.0 : frequency_hz[k - 1])))
      throw Failure(FailureKind::bad_input,
                    fmt::format("frequency {} Hz does not rise from above zero", frequency_hz[k]),
                    "loop gain", "");
  }
}

}  // namespace

Margins read_margins(const Eigen::VectorXd& frequency_hz, const Eigen::VectorXcd& loop_gain, bool stable) {
  check_grid(frequency_hz, loop_gain);
  Margins margins;
  margins.stable = stable;
  double nearest = std::numeric_limits<double>::infinity();  // |1 + L|²
  Eigen::Index nearest_at = 0;
  for (Eigen::Index k = 0; k < loop_gain.size(); ++k) {
    const Complex here = loop_gain[k];
    if (power(1.0 + here) < nearest) {
      nearest = power(1.0 + here);
      nearest_at = k;
    }
    if (k + 1 == loop_gain.size()) break;
    const Complex next = loop_gain[k + 1];
    if (here == 0.0 || next == 0.0) continue;  // no phase, and far from -1
    const bool above = power(here) >= 1.0;
    const bool gain_crossing = above != (power(next) >= 1.0);
    const bool real_axis = (here.imag() >= 0.0) != (next.imag() >= 0.0);
    if (!gain_crossing && !real_axis) continue;
    const Step step(frequency_hz[k], frequency_hz[k + 1], here, next);
    if (gain_crossing) read_gain_crossing(step, above, margins);
    if (!real_axis) continue;
    if (const auto share = share_at_negative_axis(step)) read_phase_crossing(step, *share, margins);
  }
  margins.sensitivity_peak = 1.0 / std::sqrt(between_points(loop_gain, nearest_at));
  return margins;
}

int turns_around_minus_one(const Eigen::VectorXcd& loop_gain) {
  int turns = 0;
  for (Eigen::Index k = 0; k + 1 < loop_gain.size(); ++k) {
    const Complex here = 1.0 + loop_gain[k], next = 1.0 + loop_gain[k + 1];
    if ((here.imag() >= 0.0) == (next.imag() >= 0.0)) continue;
    // The straight line between the two meets the real axis left of -1 when the cross product has this sign.
    const double cross = here.real() * next.imag() - here.imag() * next.real();
    const bool upward = next.imag() >= 0.0;
    const bool left = upward ? cross < 0.0 : cross > 0.0;
    if (left) turns += upward ? -1 : 1;
  }
  return turns;
}

}  // namespace hoverwright::ident
