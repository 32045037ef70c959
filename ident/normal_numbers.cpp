// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/normal_numbers.h"

#include <cmath>

namespace hoverwright::ident {

double NormalNumbers::uniform() {
  // 53 random bits, shifted by half a step: never exactly zero, symmetric about it.
  return (static_cast<double>(engine_() >> 11) + 0.5) * 0x1.0p-52 - 1.0;
}

double NormalNumbers::next() {
  if (spare_) {
    const double value = *spare_;
    spare_.reset();
    return value;
  }
  double x = 0.0, y = 0.0, radius2 = 0.0;
  do {
    x = uniform();
    y = uniform();
    radius2 = x * x + y * y;
  } while (radius2 >= 1.0);
  const double factor = std::sqrt(-2.0 * std::log(radius2) / radius2);
  spare_ = y * factor;
  return x * factor;
}

}  // namespace hoverwright::ident
