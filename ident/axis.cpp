// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/axis.h"

namespace hoverwright::ident {

std::string_view axis_name(Axis axis) {
  constexpr std::array<std::string_view, 4> kNames{"roll", "pitch", "yaw", "heave"};
  return kNames[axis_index(axis)];
}

std::optional<Axis> axis_from_name(std::string_view name) {
  for (const Axis axis : kAxes) {
    if (axis_name(axis) == name) return axis;
  }
  return std::nullopt;
}

}  // namespace hoverwright::ident
