// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <array>
#include <cstddef>
#include <optional>
#include <string_view>

namespace hoverwright::ident {

/// The twelve loops of the hover controller. `velocity_x`/`position_x` act through pitch,
/// `velocity_y`/`position_y` through roll, in the heading frame (x forward, y right, both horizontal).
enum class Loop {
  roll_rate,
  roll_angle,
  pitch_rate,
  pitch_angle,
  yaw_rate,
  heading,
  climb_rate,
  altitude,
  velocity_x,
  position_x,
  velocity_y,
  position_y,
};

inline constexpr std::array<Loop, 12> kLoops{Loop::roll_rate,   Loop::roll_angle, Loop::pitch_rate,
                                             Loop::pitch_angle, Loop::yaw_rate,   Loop::heading,
                                             Loop::climb_rate,  Loop::altitude,   Loop::velocity_x,
                                             Loop::position_x,  Loop::velocity_y, Loop::position_y};

constexpr std::size_t loop_index(Loop loop) {
  return static_cast<std::size_t>(loop);
}
std::string_view loop_name(Loop loop);
std::optional<Loop> loop_from_name(std::string_view name);

/// Gains of one loop in parallel form. Input: the loop's error (rad/s, rad, m/s or m). Output: the set point
/// of the loop inside, or the axis demand (normalised) for rate loops and climb rate; velocity loops put out
/// an acceleration in m/s², turned into a lean angle by atan(acceleration / g).
struct LoopGains {
  double kp = 0.0;  ///< output unit per error unit
  double ki = 0.0;  ///< output unit per error unit and second
  double kd = 0.0;  ///< output unit per error unit per second, acts on the measurement
  std::optional<double> derivative_cutoff_hz;  ///< first-order low-pass of the derivative; required if kd > 0
  std::optional<double> limit;  ///< |output| bound, output unit; integration stops at the bound
};

/// Gains of all twelve loops, indexed by loop_index. A loop that is not flown has no entry.
using LoopGainSet = std::array<std::optional<LoopGains>, 12>;

}  // namespace hoverwright::ident
