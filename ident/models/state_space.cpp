// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/models/state_space.h"

#include <fmt/format.h>

#include <Eigen/Dense>
#include <cmath>
#include <complex>
#include <numbers>
#include <unsupported/Eigen/MatrixFunctions>
#include <vector>

#include "ident/failure.h"

namespace hoverwright::ident {
namespace {

/// Coefficients of Π(s - root), highest power first. @throws Failure if complex roots do not come in pairs.
Eigen::VectorXd polynomial(const std::vector<std::complex<double>>& roots) {
  Eigen::VectorXcd coefficients = Eigen::VectorXcd::Ones(1);
  Eigen::VectorXd magnitude =
      Eigen::VectorXd::Ones(1);  // the same with |root|: what rounding is measured against
  for (const auto& root : roots) {
    Eigen::VectorXcd next = Eigen::VectorXcd::Zero(coefficients.size() + 1);
    Eigen::VectorXd next_magnitude = Eigen::VectorXd::Zero(coefficients.size() + 1);
    next.head(coefficients.size()) = coefficients;
    next.tail(coefficients.size()) -= root * coefficients;
    next_magnitude.head(coefficients.size()) = magnitude;
    next_magnitude.tail(coefficients.size()) += std::abs(root) * magnitude;
    coefficients = next;
    magnitude = next_magnitude;
  }
  // A pair leaves an imaginary part of a few rounding errors; 1e-9 of the magnitude is far above that and far
  // below a root without its partner.
  if ((coefficients.imag().array().abs() > 1e-9 * magnitude.array()).any())
    throw Failure(FailureKind::internal_error, "complex zeros or poles without their conjugates",
                  "transfer function", "");
  return coefficients.real();
}

struct HeldStep {
  Eigen::MatrixXd transition;  ///< exp(A t)
  Eigen::MatrixXd input;       ///< ∫₀ᵗ exp(A s) ds B
};

/// Both from one exponential of [A B; 0 0] t (Van Loan, IEEE Trans. Automatic Control 1978).
HeldStep held_step(const StateSpace& system, double span_s) {
  const Eigen::Index n = system.a.rows(), m = system.b.cols();
  Eigen::MatrixXd joint = Eigen::MatrixXd::Zero(n + m, n + m);
  joint.topLeftCorner(n, n) = system.a * span_s;
  joint.topRightCorner(n, m) = system.b * span_s;
  const Eigen::MatrixXd exponential = joint.exp();
  return {exponential.topLeftCorner(n, n), exponential.topRightCorner(n, m)};
}

void check_sizes(const StateSpace& s, double sample_rate_hz) {
  const bool consistent = s.a.rows() == s.a.cols() && s.b.rows() == s.a.rows() && s.c.cols() == s.a.rows() &&
                          s.d.rows() == s.c.rows() && s.d.cols() == s.b.cols();
  if (!consistent) throw Failure(FailureKind::internal_error, "matrix sizes do not agree", "state space", "");
  if (!(sample_rate_hz > 0.0))
    throw Failure(FailureKind::bad_input, fmt::format("sample rate {} Hz is not positive", sample_rate_hz),
                  "", "");
  if (!(s.input_delay_s * sample_rate_hz > -1.0))
    throw Failure(FailureKind::bad_input,
                  fmt::format("delay {} s is more than a sample ahead", s.input_delay_s), "", "");
}

/// Output looked at m = -τ after the sample, 0 < m < Δ: the state is still the one at the sample.
SampledStateSpace sample_ahead(const StateSpace& system, double sample_rate_hz) {
  const HeldStep whole = held_step(system, 1.0 / sample_rate_hz);
  const HeldStep ahead = held_step(system, -system.input_delay_s);
  return {whole.transition, whole.input, system.c * ahead.transition, system.d + system.c * ahead.input,
          sample_rate_hz};
}

/// States: x, then u[k-1] ... u[k-d-1] (the last only for a fraction).
SampledStateSpace sample_delayed(const StateSpace& system, double sample_rate_hz) {
  const double sample_s = 1.0 / sample_rate_hz;
  // A fraction within 1e-9 of a sample of a whole one is whole: it changes the response by less than 1e-9 of
  // a step and saves a state with a vanishing entry.
  const double delay_samples = system.input_delay_s * sample_rate_hz;
  double whole = std::floor(delay_samples);
  double fraction = delay_samples - whole;
  if (fraction > 1.0 - 1e-9) whole += 1.0;
  if (fraction < 1e-9 || fraction > 1.0 - 1e-9) fraction = 0.0;

  const HeldStep late = held_step(system, fraction * sample_s);           // old input acts first ...
  const HeldStep early = held_step(system, (1.0 - fraction) * sample_s);  // ... then the newer one
  const Eigen::Index n = system.a.rows(), m = system.b.cols(), d = static_cast<Eigen::Index>(whole);
  const Eigen::Index kept = d + (fraction > 0.0 ? 1 : 0);
  const Eigen::Index size = n + m * kept;
  SampledStateSpace sampled{Eigen::MatrixXd::Zero(size, size), Eigen::MatrixXd::Zero(size, m),
                            Eigen::MatrixXd::Zero(system.c.rows(), size),
                            Eigen::MatrixXd::Zero(system.c.rows(), m), sample_rate_hz};
  sampled.a.topLeftCorner(n, n) = late.transition * early.transition;
  const auto past = [&](Eigen::Index steps) { return n + m * (steps - 1); };  // column of u[k-steps]
  if (d == 0) {
    sampled.b.topRows(n) = early.input;
  } else {
    sampled.a.block(0, past(d), n, m) = early.input;
  }
  if (fraction > 0.0) sampled.a.block(0, past(d + 1), n, m) = early.transition * late.input;
  if (kept > 0) sampled.b.block(n, 0, m, m).setIdentity();
  for (Eigen::Index i = 2; i <= kept; ++i) sampled.a.block(past(i), past(i - 1), m, m).setIdentity();

  sampled.c.leftCols(n) = system.c;
  if (kept == 0) {
    sampled.d = system.d;
  } else {
    sampled.c.block(0, past(kept), system.c.rows(), m) = system.d;
  }
  return sampled;
}

}  // namespace

StateSpace state_space(const TransferFunction& transfer_function) {
  const Eigen::VectorXd denominator = polynomial(transfer_function.poles);
  const Eigen::VectorXd numerator = transfer_function.gain * polynomial(transfer_function.zeros);
  const Eigen::Index n = denominator.size() - 1;
  if (numerator.size() > denominator.size())
    throw Failure(FailureKind::internal_error,
                  fmt::format("{} zeros and {} poles: improper", numerator.size() - 1, n),
                  "transfer function", "");
  Eigen::VectorXd padded = Eigen::VectorXd::Zero(n + 1);
  padded.tail(numerator.size()) = numerator;

  StateSpace system{Eigen::MatrixXd::Zero(n, n), Eigen::MatrixXd::Zero(n, 1), Eigen::MatrixXd::Zero(1, n),
                    Eigen::MatrixXd::Zero(1, 1), transfer_function.delay_s};
  system.d(0, 0) = padded[0];
  if (n == 0) return system;
  system.a.row(0) = -denominator.tail(n).transpose();
  if (n > 1) system.a.bottomLeftCorner(n - 1, n - 1).setIdentity();
  system.b(0, 0) = 1.0;
  system.c.row(0) = (padded.tail(n) - padded[0] * denominator.tail(n)).transpose();
  return system;
}

Eigen::MatrixXcd SampledStateSpace::response(double frequency_hz) const {
  const std::complex<double> z = std::polar(1.0, 2.0 * std::numbers::pi * frequency_hz / sample_rate_hz);
  if (a.rows() == 0) return d.cast<std::complex<double>>();
  const Eigen::MatrixXcd resolvent = z * Eigen::MatrixXcd::Identity(a.rows(), a.rows()) - a;
  return c * resolvent.partialPivLu().solve(b.cast<std::complex<double>>()) + d.cast<std::complex<double>>();
}

SampledStateSpace sample_with_hold(const StateSpace& system, double sample_rate_hz) {
  check_sizes(system, sample_rate_hz);
  return system.input_delay_s < 0.0 ? sample_ahead(system, sample_rate_hz)
                                    : sample_delayed(system, sample_rate_hz);
}

Eigen::MatrixXd simulate(const SampledStateSpace& system, const Eigen::Ref<const Eigen::MatrixXd>& input) {
  if (input.cols() != system.b.cols())
    throw Failure(FailureKind::bad_input,
                  fmt::format("{} inputs given, {} needed", input.cols(), system.b.cols()), "", "");
  Eigen::MatrixXd output(input.rows(), system.c.rows());
  Eigen::VectorXd state = Eigen::VectorXd::Zero(system.a.rows());
  Eigen::VectorXd next(state.size());
  for (Eigen::Index k = 0; k < input.rows(); ++k) {
    output.row(k).transpose().noalias() = system.c * state + system.d * input.row(k).transpose();
    next.noalias() = system.a * state + system.b * input.row(k).transpose();
    state.swap(next);
  }
  return output;
}

}  // namespace hoverwright::ident
