// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <cstdint>
#include <optional>
#include <random>

namespace hoverwright::ident {

/// Standard normal numbers by the polar method (Marsaglia & Bray, SIAM Review 1964) on the 64-bit Mersenne
/// twister. The mapping is our own because std::normal_distribution gives other numbers with another standard
/// library.
class NormalNumbers {
 public:
  explicit NormalNumbers(std::uint64_t seed) : engine_(seed) {}
  double next();

 private:
  double uniform();  ///< (-1, 1)
  std::mt19937_64 engine_;
  std::optional<double> spare_;
};

}  // namespace hoverwright::ident
