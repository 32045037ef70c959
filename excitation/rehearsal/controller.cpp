// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/controller.h"

#include <fmt/format.h>

#include <cmath>
#include <numbers>

#include "excitation/rehearsal/arms.h"
#include "ident/failure.h"
#include "ident/gravity.h"

namespace hoverwright::excitation {

namespace {

using ident::Loop;
using std::numbers::pi;

/// A horizontal world vector (north, east) in the heading frame (forward, right).
Eigen::Vector2d in_heading_frame(const Eigen::Vector3d& world, double heading_rad) {
  const double c = std::cos(heading_rad), s = std::sin(heading_rad);
  return {c * world.x() + s * world.y(), -s * world.x() + c * world.y()};
}

bool is_horizontal(Loop loop) {
  return loop == Loop::velocity_x || loop == Loop::position_x || loop == Loop::velocity_y ||
         loop == Loop::position_y;
}

bool is_vertical(Loop loop) {
  return loop == Loop::climb_rate || loop == Loop::altitude;
}

}  // namespace

HoverController::HoverController(const ident::Vehicle& vehicle, double hover_command, bool position_loops,
                                 bool altitude_loops)
    : hover_command_(hover_command),
      acceleration_limit_m_s2_(ident::kStandardGravity * std::tan(vehicle.limits.tilt_deg * pi / 180.0)),
      position_loops_(position_loops),
      altitude_loops_(altitude_loops) {
  for (const Loop which : ident::kLoops) {
    if (is_horizontal(which) && !position_loops) continue;
    if (is_vertical(which) && !altitude_loops) continue;
    const std::string pointer = fmt::format("/loops/{}", ident::loop_name(which));
    const auto& gains = vehicle.loops[ident::loop_index(which)];
    if (!gains) {
      throw ident::Failure(
          ident::FailureKind::bad_input,
          fmt::format("the loop {} has no gains, and hover needs it", ident::loop_name(which)), pointer,
          "add its present gains to the vehicle file");
    }
    try {
      loops_[ident::loop_index(which)].emplace(*gains, vehicle.control.sample_rate_hz);
    } catch (const ident::Failure& failure) {
      throw ident::Failure(failure.kind(), failure.problem(), pointer, failure.advice());
    }
  }
  if (vehicle.control.gyro_filter_hz) {
    const ident::LowPass2 filter(*vehicle.control.gyro_filter_hz, vehicle.control.sample_rate_hz);
    gyro_filter_ = {filter, filter, filter};
  }
}

void HoverController::hold(const Measurement& m, const Eigen::Vector3d& position_m, double heading_rad) {
  target_position_m_ = position_m;
  target_heading_rad_ = heading_rad;
  if (gyro_filter_) {
    for (Eigen::Index i = 0; i < 3; ++i) (*gyro_filter_)[static_cast<std::size_t>(i)].reset(m.rate_rad_s(i));
  }
  loop(Loop::roll_rate).reset(m.rate_rad_s.x());
  loop(Loop::pitch_rate).reset(m.rate_rad_s.y());
  loop(Loop::yaw_rate).reset(m.rate_rad_s.z());
  loop(Loop::roll_angle).reset(m.attitude_rad.x());
  loop(Loop::pitch_angle).reset(m.attitude_rad.y());
  loop(Loop::heading).reset(0.0);
  if (altitude_loops_) {
    loop(Loop::climb_rate).reset(-m.velocity_m_s.z());
    loop(Loop::altitude).reset(-m.position_m.z());
  }
  if (position_loops_) {
    const Eigen::Vector2d velocity = in_heading_frame(m.velocity_m_s, m.attitude_rad.z());
    loop(Loop::velocity_x).reset(velocity.x());
    loop(Loop::velocity_y).reset(velocity.y());
    loop(Loop::position_x).reset(0.0);
    loop(Loop::position_y).reset(0.0);
  }
}

Eigen::Vector2d HoverController::lean_set_point(const Measurement& m) {
  if (!position_loops_) return Eigen::Vector2d::Zero();
  const double heading = m.attitude_rad.z();
  const Eigen::Vector2d error = in_heading_frame(target_position_m_ - m.position_m, heading);
  const Eigen::Vector2d velocity = in_heading_frame(m.velocity_m_s, heading);
  // The position loops see the turned error as (0 - (-error)), so that a derivative still acts on the
  // measurement.
  Eigen::Vector2d acceleration(
      loop(Loop::velocity_x).step(loop(Loop::position_x).step(0.0, -error.x()), velocity.x()),
      loop(Loop::velocity_y).step(loop(Loop::position_y).step(0.0, -error.y()), velocity.y()));
  const double size = acceleration.norm();
  if (size > acceleration_limit_m_s2_) acceleration *= acceleration_limit_m_s2_ / size;
  return {std::atan(acceleration.y() / ident::kStandardGravity),
          -std::atan(acceleration.x() / ident::kStandardGravity)};
}

double HoverController::heave_demand(const Measurement& m) {
  if (!altitude_loops_) return 0.0;
  const double climb = loop(Loop::altitude).step(-target_position_m_.z(), -m.position_m.z());
  const double feedback = loop(Loop::climb_rate).step(climb, -m.velocity_m_s.z());
  const double upright = std::cos(m.attitude_rad.x()) * std::cos(m.attitude_rad.y());
  return (hover_command_ + feedback) / upright - hover_command_;
}

Eigen::Vector4d HoverController::step(const Measurement& m) {
  Eigen::Vector3d rate = m.rate_rad_s;
  if (gyro_filter_) {
    for (Eigen::Index i = 0; i < 3; ++i) rate(i) = (*gyro_filter_)[static_cast<std::size_t>(i)].step(rate(i));
  }
  const Eigen::Vector2d lean = lean_set_point(m);
  const double heading_error = std::remainder(target_heading_rad_ - m.attitude_rad.z(), 2.0 * pi);
  const double roll_rate = loop(Loop::roll_angle).step(lean.x(), m.attitude_rad.x());
  const double pitch_rate = loop(Loop::pitch_angle).step(lean.y(), m.attitude_rad.y());
  const double yaw_rate = loop(Loop::heading).step(0.0, -heading_error);
  return {loop(Loop::roll_rate).step(roll_rate, rate.x()), loop(Loop::pitch_rate).step(pitch_rate, rate.y()),
          loop(Loop::yaw_rate).step(yaw_rate, rate.z()), heave_demand(m)};
}

}  // namespace hoverwright::excitation
