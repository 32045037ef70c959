// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loop_gains.h"

namespace hoverwright::ident {

std::string_view loop_name(Loop loop) {
  constexpr std::array<std::string_view, 12> kNames{"roll_rate",  "roll_angle", "pitch_rate", "pitch_angle",
                                                    "yaw_rate",   "heading",    "climb_rate", "altitude",
                                                    "velocity_x", "position_x", "velocity_y", "position_y"};
  return kNames[loop_index(loop)];
}

std::optional<Loop> loop_from_name(std::string_view name) {
  for (const Loop loop : kLoops) {
    if (loop_name(loop) == name) return loop;
  }
  return std::nullopt;
}

}  // namespace hoverwright::ident
