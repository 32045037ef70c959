// SPDX-License-Identifier: GPL-3.0-or-later
#include <array>
#include <cmath>
#include <complex>
#include <numbers>
#include <vector>

#include "ident/models/axis_numbers.h"
#include "ident/models/held_block.h"

namespace hoverwright::ident {
namespace {

using Complex = std::complex<double>;

/// Whole samples d + 1 and advance m of a delay τ = (d+1)Δ - m.
struct SampledDelay {
  double samples;
  double advance_s;
};

SampledDelay split_delay(double total_delay_s, double sample_s) {
  const double hold_free = total_delay_s - 0.5 * sample_s;
  const double samples = std::floor(hold_free / sample_s) + 1.0;
  return {samples, samples * sample_s - hold_free};
}

/// B(b) and the divided difference D = (B(b) - B(a)) / (b - a), which carry every two-pole structure:
///   1/((s+a)(s+b)) -> -D,   s/((s+a)(s+b)) -> B(b) + a D.
struct PolePair {
  Complex block, block_by_b, block_by_advance;
  Complex difference, difference_by_a, difference_by_b, difference_by_advance;
};

/// Two first-order blocks at poles a, b. Where the poles nearly coincide the divided difference is the mean
/// of the derivative over [a, b], D = ∫₀¹ B'(a + t (b - a)) dt, by Gauss-Legendre; nothing cancels there.
class PairOfBlocks {
 public:
  PairOfBlocks(double a, double b, double sample_s, double advance_s)
      : a_(a), b_(b), sample_s_(sample_s), advance_s_(advance_s) {
    // Closer than a tenth: the direct quotient loses up to two digits at the edge of this range; five nodes
    // err by ~ (half gap / (2 · distance to the nearest singularity))^10 < (1/40)^10 ~ 1e-16, the singularity
    // being at p = -jω.
    near_ = std::abs(b - a) < 0.1 * std::abs(b);
    blocks_.emplace_back(b, sample_s, advance_s);
    if (near_) {
      for (double t : kNode) blocks_.emplace_back(a + t * (b - a), sample_s, advance_s);
    } else {
      blocks_.emplace_back(a, sample_s, advance_s);
    }
  }

  [[nodiscard]] PolePair at(double omega_sample) const {
    const HeldResponse fast = held_response(blocks_[0], omega_sample, sample_s_, advance_s_);
    PolePair pair{fast.value, fast.slope, fast.by_advance, {}, {}, {}, {}};
    if (near_) {
      for (std::size_t i = 0; i < kNode.size(); ++i) {
        const HeldResponse node = held_response(blocks_[i + 1], omega_sample, sample_s_, advance_s_);
        pair.difference += kWeight[i] * node.slope;
        pair.difference_by_a += kWeight[i] * (1.0 - kNode[i]) * node.curvature;
        pair.difference_by_b += kWeight[i] * kNode[i] * node.curvature;
        pair.difference_by_advance += kWeight[i] * node.by_advance_slope;
      }
    } else {
      const HeldResponse slow = held_response(blocks_[1], omega_sample, sample_s_, advance_s_);
      const double gap = b_ - a_;
      pair.difference = (fast.value - slow.value) / gap;
      pair.difference_by_a = (pair.difference - slow.slope) / gap;
      pair.difference_by_b = (fast.slope - pair.difference) / gap;
      pair.difference_by_advance = (fast.by_advance - slow.by_advance) / gap;
    }
    return pair;
  }

 private:
  // Gauss-Legendre, five points on [0, 1]: 1/2 ± sqrt(5 ∓ 2 sqrt(10/7)) / 6 (Abramowitz & Stegun,
  // table 25.4).
  static constexpr std::array<double, 5> kNode = {0.046910077030668004, 0.230765344947158454, 0.5,
                                                  0.769234655052841546, 0.953089922969331996};
  static constexpr std::array<double, 5> kWeight = {0.118463442528094544, 0.239314335249683234,
                                                    0.284444444444444444, 0.239314335249683234,
                                                    0.118463442528094544};
  double a_, b_, sample_s_, advance_s_;
  bool near_ = false;
  std::vector<HeldBlock> blocks_;
};

Eigen::VectorXcd one_pole(const AxisNumbers& n, const Eigen::VectorXd& frequency_hz, double sample_s,
                          Eigen::MatrixXcd* jacobian) {
  const SampledDelay delay = split_delay(n.delay, sample_s);
  const HeldBlock block(n.damping, sample_s, delay.advance_s);
  Eigen::VectorXcd response(frequency_hz.size());
  if (jacobian != nullptr) jacobian->resize(frequency_hz.size(), 3);
  for (Eigen::Index k = 0; k < frequency_hz.size(); ++k) {
    const double angle = 2.0 * std::numbers::pi * frequency_hz[k] * sample_s;
    const Complex shift = std::polar(1.0, -angle * delay.samples);
    const HeldResponse held = held_response(block, angle, sample_s, delay.advance_s);
    response[k] = n.gain * shift * held.value;
    if (jacobian == nullptr) continue;
    (*jacobian)(k, 0) = shift * held.value;
    (*jacobian)(k, 1) = n.gain * shift * held.slope;
    (*jacobian)(k, 2) = -n.gain * shift * held.by_advance;
  }
  return response;
}

Eigen::VectorXcd two_pole(const AxisNumbers& n, const Eigen::VectorXd& frequency_hz, double sample_s,
                          Eigen::MatrixXcd* jacobian) {
  const SampledDelay delay = split_delay(n.delay, sample_s);
  const double lag = *n.lag, a = n.damping, b = 1.0 / lag;
  const PairOfBlocks blocks(a, b, sample_s, delay.advance_s);
  const Eigen::Index last = n.lead_is_parameter ? 4 : 3;
  Eigen::VectorXcd response(frequency_hz.size());
  if (jacobian != nullptr) jacobian->resize(frequency_hz.size(), last + 1);
  for (Eigen::Index k = 0; k < frequency_hz.size(); ++k) {
    const double angle = 2.0 * std::numbers::pi * frequency_hz[k] * sample_s;
    const Complex scale = n.gain / lag * std::polar(1.0, -angle * delay.samples);
    const PolePair pair = blocks.at(angle);
    const Complex rate = pair.block + a * pair.difference;
    const Complex shape = n.lead * rate - n.constant * pair.difference;
    response[k] = scale * shape;
    if (jacobian == nullptr) continue;
    const Complex by_a =
        n.lead * (pair.difference + a * pair.difference_by_a) - n.constant * pair.difference_by_a;
    const Complex by_b =
        n.lead * (pair.block_by_b + a * pair.difference_by_b) - n.constant * pair.difference_by_b;
    const Complex by_advance = n.lead * (pair.block_by_advance + a * pair.difference_by_advance) -
                               n.constant * pair.difference_by_advance;
    (*jacobian)(k, 0) = scale / n.gain * shape;
    (*jacobian)(k, 1) = scale * by_a;
    (*jacobian)(k, 2) = -scale * (shape + b * by_b) * b;
    if (n.lead_is_parameter) (*jacobian)(k, 3) = scale * rate;
    (*jacobian)(k, last) = -scale * by_advance;
  }
  return response;
}

}  // namespace

Eigen::VectorXcd sampled_axis_response(const AxisNumbers& numbers, const Eigen::VectorXd& frequency_hz,
                                       double sample_rate_hz, Eigen::MatrixXcd* jacobian) {
  const double sample_s = 1.0 / sample_rate_hz;
  return numbers.lag ? two_pole(numbers, frequency_hz, sample_s, jacobian)
                     : one_pole(numbers, frequency_hz, sample_s, jacobian);
}

}  // namespace hoverwright::ident
