// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <Eigen/Geometry>
#include <array>
#include <deque>

#include "excitation/rehearsal/turbulence.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::excitation {

/// Motion of the vehicle. World axes north, east, down; body axes forward, right, down.
struct MotionState {
  Eigen::Vector3d position_m = Eigen::Vector3d::Zero();          ///< world
  Eigen::Vector3d velocity_m_s = Eigen::Vector3d::Zero();        ///< world
  Eigen::Quaterniond attitude = Eigen::Quaterniond::Identity();  ///< body to world
  Eigen::Vector3d rate_rad_s = Eigen::Vector3d::Zero();          ///< body
  Eigen::VectorXd rotor_speed_rad_s;
};

/// Roll, pitch, heading (rotation about z, then y, then x).
Eigen::Vector3d euler_angles(const Eigen::Quaterniond& attitude);

/// Angle between the body's z axis and the vertical.
double tilt_rad(const Eigen::Quaterniond& attitude);

/// Six degrees of freedom with rotors of first-order speed lag.
///   rotor i:  dΩ/dt = (Ω_max sqrt(command) - Ω)/lag
///   thrust    T_max (Ω/Ω_max)² - inflow (Ω/Ω_hover) w,       w: the hub's upward velocity through the air
///   hub drag  -in_plane_drag (Ω/Ω_hover) (vx, vy),             v: the hub's velocity through the air, ω × r
///   included moment    r × force, and about z  -spin (torque_per_thrust T_max (Ω/Ω_max)² + J dΩ/dt) rotors
///   -ω × (0, 0, Σ spin J Ω);   body drag -½ρ C_d A |v| v at the centre of gravity
/// Thrust varies with command and inflow linearly about hover (blade-element theory for small inflow, e.g.
/// Leishman, Principles of Helicopter Aerodynamics, ch. 3); the model holds for hover and slow flight.
class RigidBody {
 public:
  /// @throws Failure (bad_input) when mass, inertia, thrust, rotor speed or a rotor lag is not positive, or
  /// it cannot hover.
  explicit RigidBody(const ident::Airframe& airframe);

  MotionState& state() { return state_; }
  [[nodiscard]] const MotionState& state() const { return state_; }

  /// Fourth-order Runge-Kutta with fixed steps, commands and air constant; the attitude is normalised after
  /// every step.
  void step(const Eigen::VectorXd& command, const Air& air, double duration_s);

  /// What an accelerometer at the centre of gravity feels, body axes: (force without gravity)/mass.
  [[nodiscard]] Eigen::Vector3d specific_force_m_s2(const Air& air) const;

 private:
  struct Wrench {
    Eigen::Vector3d force, moment;
  };
  /// Forces and moments on the body without gravity; `acceleration` is dΩ/dt of each rotor (empty: not
  /// needed).
  Wrench wrench(const MotionState& state, const Eigen::VectorXd* rotor_acceleration, const Air& air) const;
  void derivative(const MotionState& state, const Eigen::VectorXd& speed_command, const Air& air,
                  MotionState& rate) const;

  ident::Airframe airframe_;
  double hover_speed_rad_s_;
  double longest_step_s_;
  Eigen::VectorXd lag_s_;
  MotionState state_;
  std::array<MotionState, 4> slope_;  // work space of the integration
  MotionState trial_;
};

/// The vehicle behind its latency: a command handed over at a control sample reaches the rotors latency
/// later, whatever fraction or multiple of the interval that is, and is held until the next arrives.
class DelayedVehicle {
 public:
  DelayedVehicle(const ident::Airframe& airframe, double sample_rate_hz, double latency_s);

  RigidBody& body() { return body_; }
  [[nodiscard]] const RigidBody& body() const { return body_; }

  /// One control interval: `command` was computed at its start.
  void advance(const Eigen::VectorXd& command, const Air& air);

 private:
  RigidBody body_;
  double interval_s_;
  double split_s_;  ///< when in the interval a command arrives
  std::deque<Eigen::VectorXd>
      on_the_way_;  ///< oldest first; the front is what the rotors follow when the interval starts
};

}  // namespace hoverwright::excitation
