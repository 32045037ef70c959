// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/random.h"

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
    : normal_(scramble(scramble(seed) + static_cast<std::uint64_t>(source))) {}

Eigen::Vector3d NormalStream::next3() {
  const double a = next();
  const double b = next();
  const double c = next();
  return {a, b, c};
}

}  // namespace hoverwright::excitation
