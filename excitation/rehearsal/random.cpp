// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/random.h"

#include <cmath>

namespace hoverwright::excitation {

namespace {

/// Mixes all bits of its argument (the finaliser of splitmix64; Steele, Lea & Flood, OOPSLA 2014), so that
/// neighbouring seeds and sources start far apart.
std::uint64_t scramble(std::uint64_t x) {
  x += 0x9e3779b97f4a7c15ULL;
  x = (x ^ (x >> 30)) * 0xbf58476d1ce4e5b9ULL;
  x = (x ^ (x >> 27)) * 0x94d049bb133111ebULL;
  return x ^ (x >> 31);
}

}  // namespace

NormalStream::NormalStream(std::uint64_t seed, NoiseSource source)
    : engine_(scramble(scramble(seed) + static_cast<std::uint64_t>(source))) {}

double NormalStream::uniform() {
  // 53 random bits, shifted by half a step: never exactly zero, symmetric about it.
  return (static_cast<double>(engine_() >> 11) + 0.5) * 0x1.0p-52 - 1.0;
}

double NormalStream::next() {
  if (has_spare_) {
    has_spare_ = false;
    return spare_;
  }
  double x = 0.0, y = 0.0, radius2 = 0.0;
  do {
    x = uniform();
    y = uniform();
    radius2 = x * x + y * y;
  } while (radius2 >= 1.0);
  const double factor = std::sqrt(-2.0 * std::log(radius2) / radius2);
  spare_ = y * factor;
  has_spare_ = true;
  return x * factor;
}

Eigen::Vector3d NormalStream::next3() {
  const double a = next();
  const double b = next();
  const double c = next();
  return {a, b, c};
}

}  // namespace hoverwright::excitation
