// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/rigid_body.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "excitation/rehearsal/arms.h"
#include "excitation/rehearsal/truth.h"
#include "ident/failure.h"
#include "ident/gravity.h"

namespace hoverwright::excitation {

namespace {

void require_positive(double value, const std::string& key) {
  if (value > 0.0 && std::isfinite(value)) return;
  throw ident::Failure(ident::FailureKind::bad_input, fmt::format("{} must be positive, not {}", key, value),
                       "/airframe/" + key, "");
}

/// dq/dt = ½ q ⊗ (0, ω).
Eigen::Quaterniond attitude_rate(const Eigen::Quaterniond& q, const Eigen::Vector3d& rate) {
  const Eigen::Quaterniond product = q * Eigen::Quaterniond(0.0, rate.x(), rate.y(), rate.z());
  return Eigen::Quaterniond(0.5 * product.coeffs());
}

/// out = base + h · rate, entry by entry (the attitude leaves the unit sphere by rounding of the method's
/// order only).
void move_along(const MotionState& base, const MotionState& rate, double h, MotionState& out) {
  out.position_m = base.position_m + h * rate.position_m;
  out.velocity_m_s = base.velocity_m_s + h * rate.velocity_m_s;
  out.attitude.coeffs() = base.attitude.coeffs() + h * rate.attitude.coeffs();
  out.rate_rad_s = base.rate_rad_s + h * rate.rate_rad_s;
  out.rotor_speed_rad_s = base.rotor_speed_rad_s + h * rate.rotor_speed_rad_s;
}

}  // namespace

Eigen::Vector3d euler_angles(const Eigen::Quaterniond& q) {
  const double roll =
      std::atan2(2.0 * (q.w() * q.x() + q.y() * q.z()), 1.0 - 2.0 * (q.x() * q.x() + q.y() * q.y()));
  // Rounding can push the sine past one by an ulp when the nose points straight up.
  const double pitch = std::asin(std::clamp(2.0 * (q.w() * q.y() - q.z() * q.x()), -1.0, 1.0));
  const double heading =
      std::atan2(2.0 * (q.w() * q.z() + q.x() * q.y()), 1.0 - 2.0 * (q.y() * q.y() + q.z() * q.z()));
  return {roll, pitch, heading};
}

double tilt_rad(const Eigen::Quaterniond& q) {
  // From the sine of half the tilt: acos of the cosine would lose half the digits near level.
  return 2.0 * std::asin(std::min(1.0, std::hypot(q.x(), q.y())));
}

RigidBody::RigidBody(const ident::Airframe& airframe) : airframe_(airframe) {
  require_positive(airframe.mass_kg, "mass_kg");
  require_positive(airframe.inertia_kg_m2.minCoeff(), "inertia_kg_m2");
  require_positive(airframe.thrust_max_n, "thrust_max_n");
  require_positive(airframe.speed_max_rad_s, "speed_max_rad_s");
  const auto count = static_cast<Eigen::Index>(airframe.rotors.size());
  lag_s_.resize(count);
  for (Eigen::Index i = 0; i < count; ++i) {
    lag_s_(i) = airframe.rotors[static_cast<std::size_t>(i)].speed_lag_s;
    require_positive(lag_s_(i), fmt::format("rotors/{}/speed_lag_s", i));
  }
  hover_speed_rad_s_ = airframe.speed_max_rad_s * std::sqrt(hover_command(airframe));
  // An eighth of the fastest lag: one step's error is (1/8)⁵/120, 3e-7 of the change. 5 ms keeps the slower
  // motion as exact.
  longest_step_s_ = std::min(0.005, lag_s_.minCoeff() / 8.0);
  state_.rotor_speed_rad_s = Eigen::VectorXd::Constant(count, hover_speed_rad_s_);
  trial_ = state_;
  slope_.fill(state_);
}

RigidBody::Wrench RigidBody::wrench(const MotionState& state, const Eigen::VectorXd* rotor_acceleration,
                                    const Air& air) const {
  const Eigen::Matrix3d to_body = state.attitude.toRotationMatrix().transpose();
  const Eigen::Vector3d through_air = to_body * (state.velocity_m_s - air.velocity_m_s);
  const Eigen::Vector3d turning = state.rate_rad_s - to_body * air.rotation_rad_s;

  Wrench sum;
  sum.force = -0.5 * kAirDensity * airframe_.body_drag_area_m2 * through_air.norm() * through_air;
  sum.moment.setZero();
  double spin_momentum = 0.0;
  for (Eigen::Index i = 0; i < lag_s_.size(); ++i) {
    const ident::Rotor& rotor = airframe_.rotors[static_cast<std::size_t>(i)];
    const double speed = state.rotor_speed_rad_s(i);
    const double share = speed / hover_speed_rad_s_;
    const double still_thrust =
        airframe_.thrust_max_n * (speed / airframe_.speed_max_rad_s) * (speed / airframe_.speed_max_rad_s);
    const Eigen::Vector3d hub = through_air + turning.cross(rotor.position_m);
    const double upward = -hub.z();
    const Eigen::Vector3d force(-airframe_.in_plane_drag_n_s_m * share * hub.x(),
                                -airframe_.in_plane_drag_n_s_m * share * hub.y(),
                                -(still_thrust - airframe_.inflow_n_s_m * share * upward));
    sum.force += force;
    sum.moment += rotor.position_m.cross(force);
    const double spin_up = rotor_acceleration != nullptr ? (*rotor_acceleration)(i) : 0.0;
    sum.moment.z() -=
        rotor.spin * (airframe_.torque_per_thrust_m * still_thrust + airframe_.rotor_inertia_kg_m2 * spin_up);
    spin_momentum += rotor.spin * airframe_.rotor_inertia_kg_m2 * speed;
  }
  sum.moment -= state.rate_rad_s.cross(Eigen::Vector3d(0.0, 0.0, spin_momentum));
  return sum;
}

void RigidBody::derivative(const MotionState& state, const Eigen::VectorXd& speed_command, const Air& air,
                           MotionState& rate) const {
  rate.rotor_speed_rad_s = (speed_command - state.rotor_speed_rad_s).cwiseQuotient(lag_s_);
  const Wrench sum = wrench(state, &rate.rotor_speed_rad_s, air);
  const Eigen::Vector3d& inertia = airframe_.inertia_kg_m2;
  rate.position_m = state.velocity_m_s;
  rate.velocity_m_s = state.attitude.toRotationMatrix() * sum.force / airframe_.mass_kg +
                      Eigen::Vector3d(0.0, 0.0, ident::kStandardGravity);
  rate.attitude = attitude_rate(state.attitude, state.rate_rad_s);
  rate.rate_rad_s =
      (sum.moment - state.rate_rad_s.cross(inertia.cwiseProduct(state.rate_rad_s))).cwiseQuotient(inertia);
}

void RigidBody::step(const Eigen::VectorXd& command, const Air& air, double duration_s) {
  if (duration_s <= 0.0) return;
  const Eigen::VectorXd speed_command = airframe_.speed_max_rad_s * command.cwiseSqrt();
  const int steps = std::max(1, static_cast<int>(std::ceil(duration_s / longest_step_s_ - 1e-9)));
  const double h = duration_s / steps;
  auto& [k1, k2, k3, k4] = slope_;
  for (int i = 0; i < steps; ++i) {
    derivative(state_, speed_command, air, k1);
    move_along(state_, k1, 0.5 * h, trial_);
    derivative(trial_, speed_command, air, k2);
    move_along(state_, k2, 0.5 * h, trial_);
    derivative(trial_, speed_command, air, k3);
    move_along(state_, k3, h, trial_);
    derivative(trial_, speed_command, air, k4);
    move_along(state_, k1, h / 6.0, trial_);
    move_along(trial_, k2, h / 3.0, state_);
    move_along(state_, k3, h / 3.0, trial_);
    move_along(trial_, k4, h / 6.0, state_);
    state_.attitude.normalize();
  }
}

Eigen::Vector3d RigidBody::specific_force_m_s2(const Air& air) const {
  return wrench(state_, nullptr, air).force / airframe_.mass_kg;
}

DelayedVehicle::DelayedVehicle(const ident::Airframe& airframe, double sample_rate_hz, double latency_s)
    : body_(airframe), interval_s_(1.0 / sample_rate_hz) {
  const double intervals = latency_s * sample_rate_hz;
  // A latency of whole intervals must not become a step of rounding length.
  const double whole =
      std::abs(intervals - std::round(intervals)) < 1e-9 ? std::round(intervals) : std::floor(intervals);
  split_s_ = std::max(0.0, intervals - whole) * interval_s_;
  if (split_s_ < 1e-9 * interval_s_) split_s_ = 0.0;
  const Eigen::VectorXd hover =
      Eigen::VectorXd::Constant(static_cast<Eigen::Index>(airframe.rotors.size()), hover_command(airframe));
  on_the_way_.assign(static_cast<std::size_t>(whole) + 1, hover);
}

void DelayedVehicle::advance(const Eigen::VectorXd& command, const Air& air) {
  on_the_way_.push_back(command);
  body_.step(on_the_way_.front(), air, split_s_);
  on_the_way_.pop_front();
  body_.step(on_the_way_.front(), air, interval_s_ - split_s_);
}

}  // namespace hoverwright::excitation
