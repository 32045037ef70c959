// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/models/transfer_function.h"

#include <numbers>

namespace hoverwright::ident {

std::complex<double> TransferFunction::response(double frequency_hz) const {
  const std::complex<double> s(0.0, 2.0 * std::numbers::pi * frequency_hz);
  std::complex<double> value = gain * std::exp(-delay_s * s);
  for (const auto& zero : zeros) value *= s - zero;
  for (const auto& pole : poles) value /= s - pole;
  return value;
}

}  // namespace hoverwright::ident
