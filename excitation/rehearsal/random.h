// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <cstdint>

#include "ident/normal_numbers.h"

namespace hoverwright::excitation {

/// Where a stream of random numbers goes; each source has a stream of its own, so that switching one off
/// leaves the others as they were.
enum class NoiseSource : std::uint64_t {
  gust_u = 1,
  gust_v,
  gust_w,
  gust_p,
  gyro,
  accelerometer,
  attitude,
  position,
  velocity
};

/// Standard normal numbers of one source.
class NormalStream {
 public:
  NormalStream(std::uint64_t seed, NoiseSource source);
  double next() { return normal_.next(); }
  Eigen::Vector3d next3();

 private:
  ident::NormalNumbers normal_;
};

}  // namespace hoverwright::excitation
