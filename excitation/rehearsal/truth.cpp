// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/truth.h"

#include <fmt/format.h>

#include <cmath>

#include "excitation/rehearsal/arms.h"
#include "excitation/rehearsal/mixer.h"
#include "ident/failure.h"
#include "ident/gravity.h"

namespace hoverwright::excitation {

namespace {

/// Steady state against a horizontal wind.
struct Trim {
  double command = 0.0;            ///< of every motor
  double speed_share = 1.0;        ///< rotor speed over its value at hover in still air
  double through_rotor_m_s = 0.0;  ///< air through the rotors, from above
};

/// Forces along the body's x and z axes at lean θ into wind V, speed share s:
///   m g sin θ = (n d s V + D) cos θ,   n T_max c = m g cos θ + D sin θ + n inflow s V sin θ,   D = ½ρ C_d A
///   V²,   s = sqrt(c/c_hover).
/// Fixed-point iteration: each round changes c by the small share that inflow and drag have in the thrust.
Trim find_trim(const ident::Airframe& airframe, double wind_m_s) {
  const auto rotors = static_cast<double>(airframe.rotors.size());
  const double weight = airframe.mass_kg * ident::kStandardGravity;
  const double body_drag = 0.5 * kAirDensity * airframe.body_drag_area_m2 * wind_m_s * wind_m_s;
  const double hover = hover_command(airframe);
  Trim trim{hover, 1.0, 0.0};
  for (int round = 0; round < 200 && trim.command < 1.0; ++round) {
    const double lean =
        std::atan((rotors * airframe.in_plane_drag_n_s_m * trim.speed_share * wind_m_s + body_drag) / weight);
    trim.through_rotor_m_s = wind_m_s * std::sin(lean);
    const double thrust = weight * std::cos(lean) + body_drag * std::sin(lean) +
                          rotors * airframe.inflow_n_s_m * trim.speed_share * trim.through_rotor_m_s;
    const double command = thrust / (rotors * airframe.thrust_max_n);
    const bool settled = std::abs(command - trim.command) < 1e-14;
    trim.command = command;
    trim.speed_share = std::sqrt(command / hover);
    if (settled) return trim;
  }
  throw ident::Failure(ident::FailureKind::bad_input,
                       fmt::format("the vehicle cannot hold against {:.1f} m/s of wind", wind_m_s),
                       "/airframe/weather/wind_m_s", "lower the wind");
}

/// Moment or force per unit rate (or climb rate) that works against it, all rotors.
double resistance(const ident::Airframe& airframe, ident::Axis axis, const Trim& trim, double wind_m_s) {
  const double inflow = airframe.inflow_n_s_m * trim.speed_share;
  const double drag = airframe.in_plane_drag_n_s_m * trim.speed_share;
  double sum = axis == ident::Axis::heave ? 0.5 * kAirDensity * airframe.body_drag_area_m2 * wind_m_s : 0.0;
  for (const ident::Rotor& rotor : airframe.rotors) {
    const Eigen::Vector3d& r = rotor.position_m;
    switch (axis) {
      // A hub at y moves down with p y and gains inflow·p·y of thrust at arm -y; a hub at z slides sideways
      // and is dragged.
      case ident::Axis::roll:
        sum += inflow * r.y() * r.y() + drag * r.z() * r.z();
        break;
      case ident::Axis::pitch:
        sum += inflow * r.x() * r.x() + drag * r.z() * r.z();
        break;
      case ident::Axis::yaw:
        sum += drag * r.head<2>().squaredNorm();
        break;
      case ident::Axis::heave:
        sum += inflow;
        break;
    }
  }
  return sum;
}

}  // namespace

double hover_command(const ident::Airframe& airframe) {
  const double full_thrust_n = airframe.thrust_max_n * static_cast<double>(airframe.rotors.size());
  const double command = airframe.mass_kg * ident::kStandardGravity / full_thrust_n;
  if (!(command < 1.0)) {
    throw ident::Failure(ident::FailureKind::bad_input,
                         fmt::format("the rotors lift {:.1f} N at full command, the vehicle weighs {:.1f} N",
                                     full_thrust_n, airframe.mass_kg * ident::kStandardGravity),
                         "/airframe/thrust_max_n", "check thrust_max_n (of one rotor) and mass_kg");
  }
  return command;
}

AxisTruth axis_truth(const ident::Vehicle& vehicle, ident::Axis axis, double steady_wind_m_s) {
  if (!vehicle.airframe) {
    throw ident::Failure(ident::FailureKind::bad_input, "the vehicle file has no airframe", "/airframe",
                         "the true axis parameters follow from the airframe only");
  }
  const ident::Airframe& airframe = *vehicle.airframe;
  const Trim trim = find_trim(airframe, steady_wind_m_s);
  const auto row = static_cast<Eigen::Index>(ident::axis_index(axis));
  const Eigen::VectorXd arm = rotor_arms(airframe).row(row).transpose();
  const Eigen::VectorXd share = Mixer(airframe).matrix().col(row);
  const double inertia = axis == ident::Axis::heave ? airframe.mass_kg : airframe.inertia_kg_m2(row);

  // The commanded speed is speed_max sqrt(command). Thrust T_max (Ω/Ω_max)² - inflow (Ω/Ω_hover) w then
  // follows the command with slope T_max - inflow w / (2 sqrt(c_hover c)) and the lag of the speed; the
  // reaction torque is that of still air.
  double slope = airframe.thrust_max_n;
  if (axis != ident::Axis::yaw) {
    slope -= airframe.inflow_n_s_m * trim.through_rotor_m_s /
             (2.0 * std::sqrt(hover_command(airframe) * trim.command));
  }
  // Unlike lags are weighted by what each rotor contributes.
  double effect = 0.0, effect_lag = 0.0;
  for (Eigen::Index i = 0; i < arm.size(); ++i) {
    const double moment = arm(i) * share(i) * slope;
    effect += moment;
    effect_lag += moment * airframe.rotors[static_cast<std::size_t>(i)].speed_lag_s;
  }

  AxisTruth truth;
  truth.structure = "rate_motor_lag";
  truth.parameters["effectiveness"] = effect / inertia;
  truth.parameters["damping"] = resistance(airframe, axis, trim, steady_wind_m_s) / inertia;
  truth.parameters["motor_lag"] = effect_lag / effect;
  truth.parameters["delay"] = vehicle.control.latency_s + 0.5 / vehicle.control.sample_rate_hz;
  if (axis == ident::Axis::heave) {
    const auto& setup = vehicle.axes[ident::axis_index(axis)];
    truth.structure = setup && setup->structure == "climb_rate" ? "climb_rate" : "heave_accel";
  } else if (axis == ident::Axis::yaw) {
    // Reaction of one rotor: torque_per_thrust · thrust + J dΩ/dt, with dΩ/dcommand = speed_max / (2
    // sqrt(command)); the ratio of the two slopes is the lead.
    truth.structure = "yaw_reaction";
    const double speed_slope = airframe.speed_max_rad_s / (2.0 * std::sqrt(trim.command));
    truth.parameters["reaction_lead"] =
        airframe.rotor_inertia_kg_m2 * speed_slope / (airframe.torque_per_thrust_m * airframe.thrust_max_n);
  }
  return truth;
}

}  // namespace hoverwright::excitation
