// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <array>
#include <cstddef>
#include <optional>
#include <string_view>

namespace hoverwright::ident {

/// The four controlled axes of a hovering craft. Body frame: x forward, y right, z down; roll, pitch and yaw
/// rates p, q, r are right-handed about x, y, z. Heave is positive upward.
enum class Axis { roll, pitch, yaw, heave };

inline constexpr std::array<Axis, 4> kAxes{Axis::roll, Axis::pitch, Axis::yaw, Axis::heave};

/// Position of the axis in kAxes, for arrays of four.
constexpr std::size_t axis_index(Axis axis) {
  return static_cast<std::size_t>(axis);
}

/// "roll", "pitch", "yaw" or "heave": the name in every file and on every screen.
std::string_view axis_name(Axis axis);

std::optional<Axis> axis_from_name(std::string_view name);

}  // namespace hoverwright::ident
