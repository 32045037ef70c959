// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <cstdint>
#include <random>

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

/// Standard normal numbers by the polar method (Marsaglia & Bray, SIAM Review 1964) on the 64-bit Mersenne
/// twister. The mapping is our own because std::normal_distribution gives other numbers with another standard
/// library.
class NormalStream {
 public:
  NormalStream(std::uint64_t seed, NoiseSource source);
  double next();
  Eigen::Vector3d next3();

 private:
  double uniform();  ///< (-1, 1)
  std::mt19937_64 engine_;
  double spare_ = 0.0;
  bool has_spare_ = false;
};

}  // namespace hoverwright::excitation
