// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/models/held_block.h"

#include <cmath>

namespace hoverwright::ident {
namespace {

/// ∫₀¹ sᵏ exp(-ys) ds = Σ (-y)ⁿ / (n! (n + k + 1)), for |y| <= 1: 19 terms leave less than 1/19! ~ 1e-17.
double moment_series(double y, int k) {
  double term = 1.0;
  double sum = 0.0;
  for (int n = 0; n < 19; ++n) {
    const double addend = term / (n + k + 1);
    sum += addend;
    if (std::abs(addend) < 1e-18) break;
    term *= -y / (n + 1);
  }
  return sum;
}

}  // namespace

std::complex<double> expm1(std::complex<double> z) {
  const double half_sine = std::sin(0.5 * z.imag());
  const double real = std::expm1(z.real()) * std::cos(z.imag()) - 2.0 * half_sine * half_sine;
  return {real, std::exp(z.real()) * std::sin(z.imag())};
}

ExponentialMoments exponential_moments(double pole, double span) {
  const double y = pole * span;
  double m0, m1, m2;
  if (std::abs(y) <= 1.0) {
    m0 = moment_series(y, 0);
    m1 = moment_series(y, 1);
    m2 = moment_series(y, 2);
  } else {
    const double decay = std::exp(-y);
    m0 = -std::expm1(-y) / y;
    m1 = (m0 - decay) / y;
    m2 = (2.0 * m1 - decay) / y;
  }
  return {span * m0, span * span * m1, span * span * span * m2};
}

HeldBlock::HeldBlock(double pole_rad_s, double sample_s, double advance_s)
    : pole(pole_rad_s),
      decay_sample(std::exp(-pole_rad_s * sample_s)),
      decay_advance(std::exp(-pole_rad_s * advance_s)),
      sample(exponential_moments(pole_rad_s, sample_s)),
      advance(exponential_moments(pole_rad_s, advance_s)) {}

HeldResponse held_response(const HeldBlock& block, double omega_sample, double sample_s, double advance_s) {
  using Complex = std::complex<double>;
  const Complex one_minus_w = -expm1(Complex(0.0, -omega_sample));
  const Complex w = 1.0 - one_minus_w;
  // Denominator Q = 1 - exp(-pΔ) w and numerator N with derivatives in p.
  const Complex q = -expm1(Complex(-block.pole * sample_s, -omega_sample));
  const Complex q1 = sample_s * block.decay_sample * w;
  const Complex q2 = -sample_s * q1;
  const Complex n = one_minus_w * block.advance.zeroth + w * block.sample.zeroth;
  const Complex n1 = -(one_minus_w * block.advance.first + w * block.sample.first);
  const Complex n2 = one_minus_w * block.advance.second + w * block.sample.second;

  const Complex inverse = 1.0 / q;
  HeldResponse response;
  response.value = n * inverse;
  response.slope = (n1 - response.value * q1) * inverse;
  response.curvature = (n2 - 2.0 * response.slope * q1 - response.value * q2) * inverse;
  response.by_advance = one_minus_w * block.decay_advance * inverse;
  response.by_advance_slope = -response.by_advance * (advance_s + q1 * inverse);
  return response;
}

}  // namespace hoverwright::ident
