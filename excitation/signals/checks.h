// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <fmt/format.h>

#include <cmath>
#include <string>

#include "ident/failure.h"

namespace hoverwright::excitation {

/// @throws Failure (bad_input) naming `member` unless the value is finite and > 0.
inline void require_positive(double value, const std::string& member) {
  if (std::isfinite(value) && value > 0.0) return;
  throw ident::Failure(ident::FailureKind::bad_input, fmt::format("{} is not a positive number", value),
                       member, "");
}

/// @throws Failure (bad_input) naming `member` unless the value is finite and >= 0.
inline void require_non_negative(double value, const std::string& member) {
  if (std::isfinite(value) && value >= 0.0) return;
  throw ident::Failure(ident::FailureKind::bad_input,
                       fmt::format("{} is not zero or a positive number", value), member, "");
}

}  // namespace hoverwright::excitation
