// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <array>
#include <filesystem>
#include <map>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "ident/axis.h"
#include "ident/loop_gains.h"

namespace hoverwright::ident {

/// One column of the log. Value in SI = scale * value in `unit`, converted. `scale` adapts signs and raw
/// counts.
struct Channel {
  std::string name;
  double scale = 1.0;
  std::string unit;
};

/// Columns of one axis. Without an excitation column only the direct estimate y/u is possible.
struct AxisChannels {
  std::optional<Channel> excitation;  ///< signal added to the demand on purpose, normalised
  Channel demand;  ///< what the mixer receives, feedback and excitation included, normalised
  Channel output;  ///< body rate (rad/s) or upward acceleration (m/s²)
};

struct AxisSetup {
  AxisChannels channels;
  std::string structure;                ///< name of a model structure, see ident/models/structure.h
  std::map<std::string, double> prior;  ///< parameter name -> value the owner believes in; may be empty
};

/// Bounds the flight must respect.
struct Limits {
  double tilt_deg = 30.0;
  double rate_deg_s = 150.0;
  double demand = 0.2;  ///< largest |demand| of an axis about its trim, normalised
  double drift_m = 5.0;
  double climb_m = 3.0;
  double endurance_s = 600.0;  ///< usable flight time of one battery
};

struct TimeChannel {
  std::string name;
  std::string unit;  ///< s, ms or us; epoch or relative
};

/// How the flight controller runs.
struct Control {
  double sample_rate_hz = 0.0;
  double latency_s = 0.0;  ///< from sampling the sensors to the command reaching the motors
  std::optional<double>
      gyro_filter_hz;  ///< second-order Butterworth low-pass on the rates the controller uses
};

/// One rotor. Position in the body frame from the centre of gravity.
struct Rotor {
  Eigen::Vector3d position_m = Eigen::Vector3d::Zero();
  int spin = 1;              ///< +1 clockwise, -1 anticlockwise, both seen from above
  double speed_lag_s = 0.0;  ///< time constant of the rotor speed
};

/// Noise of one sample, standard deviation, white from sample to sample.
struct SensorNoise {
  double gyro_rad_s = 0.0;
  double accelerometer_m_s2 = 0.0;
  double attitude_rad = 0.0;
  double position_m = 0.0;
  double velocity_m_s = 0.0;
};

/// Air around the vehicle in the rehearsal. Turbulence: Dryden, low-altitude form.
struct Weather {
  double wind_m_s = 0.0;
  double wind_from_deg = 0.0;        ///< 0 = from north, 90 = from east
  double turbulence_wind_m_s = 0.0;  ///< wind at 6 m that sets the turbulence intensity; 0 = still air
  double height_m = 10.0;            ///< height that sets the turbulence scales
};

/// The physical vehicle, used only to rehearse the flight.
struct Airframe {
  double mass_kg = 0.0;
  Eigen::Vector3d inertia_kg_m2 = Eigen::Vector3d::Zero();  ///< Ixx, Iyy, Izz about the centre of gravity
  std::vector<Rotor> rotors;
  double thrust_max_n = 0.0;         ///< of one rotor at full command, still air
  double speed_max_rad_s = 0.0;      ///< rotor speed at full command; thrust = thrust_max (speed/speed_max)²
  double torque_per_thrust_m = 0.0;  ///< reaction torque over thrust
  double rotor_inertia_kg_m2 = 0.0;  ///< of one rotor with motor bell
  double inflow_n_s_m = 0.0;  ///< thrust lost per m/s of air coming from above, at hover speed, per rotor
  double in_plane_drag_n_s_m =
      0.0;  ///< drag per m/s of air speed in the rotor plane, at hover speed, per rotor
  double body_drag_area_m2 = 0.0;  ///< drag coefficient times area of the body
  double command_min = 0.02;       ///< motor command the mixer never goes below, 0..1
  SensorNoise noise;
  Weather weather;
};

struct Vehicle {
  std::string name;
  TimeChannel time;
  Control control;
  Limits limits;
  std::array<std::optional<AxisSetup>, 4> axes;  ///< indexed by axis_index; at least one is present
  LoopGainSet loops;                             ///< present gains; loops not listed are not flown
  std::optional<double> speed_damping_1_s;       ///< horizontal drag over mass; assumed, not identified yet
  std::optional<Airframe> airframe;
};

/// Reads `hoverwright.vehicle/1`. `//` comments are accepted.
/// @throws Failure (bad_input) with the file and JSON pointer for unknown keys (naming the nearest known
/// one), wrong types, missing keys, units that are unknown or do not fit, non-positive rates, one column used
/// twice, ...
Vehicle read_vehicle(const std::filesystem::path& path);

/// Same from text; `source` names it in messages.
Vehicle parse_vehicle(std::string_view text, const std::string& source);

/// A commented vehicle file to start from. parse_vehicle accepts it as it is.
std::string vehicle_template(std::string_view name);

}  // namespace hoverwright::ident
