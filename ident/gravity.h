// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

namespace hoverwright::ident {

/// Standard acceleration of gravity, m/s², exact by definition (3rd CGPM, 1901).
inline constexpr double kStandardGravity = 9.80665;

}  // namespace hoverwright::ident
