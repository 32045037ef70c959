// SPDX-License-Identifier: GPL-3.0-or-later
#include <nlohmann/json.hpp>
#include <string>

#include "ident/failure.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::ident {
namespace {

constexpr std::string_view kBeforeName =
    R"(// The vehicle, as Hoverwright needs to know it. Lines like this one are comments.
//
// Every value below is an example: go through the file from top to bottom and replace it by your own.
// Units are SI unless a key ends in another one (_hz, _deg, _deg_s).
// Body axes: x forward, y right, z down. Roll, pitch and yaw rates are right-handed about them: roll right,
// nose up and nose right are positive. Heave is positive upward, for the demand as well as for the output.
{
  "format": "hoverwright.vehicle/1",
  "name": )";

constexpr std::string_view kAfterName = R"(,

  // The time column of the log. Unit: s, ms or us; counted from anywhere (power-up, 1970, ...).
  "time": { "name": "time_s", "unit": "s" },

  // How the flight controller runs.
  //   sample_rate_hz  rate of the inner control loop; log at this rate if you can
  //   latency_s       from sampling the sensors to the command reaching the motors, without the rotors' lag
  //   gyro_filter_hz  cutoff of the second-order Butterworth low-pass on the rates; leave out if none
  "control": { "sample_rate_hz": 400, "latency_s": 0.005, "gyro_filter_hz": 80 },

  // What the excitation flight must never exceed. Be careful: the excitation is made as large as these allow.
  //   demand       largest excursion of an axis demand about its trim; 1 moves a motor over its whole range
  //   drift_m      sideways, climb_m up or down, from where a record starts
  //   endurance_s  flight time of one battery; the schedule keeps its reserve within it
  "limits": {
    "tilt_deg": 25, "rate_deg_s": 120, "demand": 0.15, "drift_m": 5, "climb_m": 3, "endurance_s": 600
  },

  // Decay of horizontal speed by drag: drag force over mass and speed. For the velocity and position loops.
  "speed_damping_1_s": 0.1,

  // The axes to identify: any of roll, pitch, yaw, heave. Delete those you do not want.
  //
  // Channels are columns of the log. The value used is scale * column, taken from "unit" to SI; "scale" (1 if
  // left out) adapts signs and raw counts: -1 for a log whose axis points the other way. Each column may be
  // used once.
  //   excitation  what was added to the demand on purpose. Log it! Without it, the feedback of your own
  //               controller biases everything found. Leave it out only if it truly is not in the log.
  //   demand      what the mixer receives for this axis, feedback and excitation included; not the set point
  //   output      body rate (rad/s, deg/s); for heave upward acceleration (m/s^2, g) or climb rate (m/s)
  // Excitation and demand are normalised, unit "1".
  //
  // Structures, K effectiveness, a damping, T motor_lag, Z reaction_lead, each with a delay:
  //   rate_damped     K / (s + a)                        roll, pitch, yaw: rotors too quick to be seen
  //   rate_motor_lag  K / ((s + a)(T s + 1))             roll, pitch, yaw: rotors with lag
  //   yaw_reaction    K (Z s + 1) / ((s + a)(T s + 1))   yaw: torque of speeding up the rotors comes first
  //   heave_accel     K s / ((s + a)(T s + 1))           heave: demand to acceleration
  //   climb_rate      K / ((s + a)(T s + 1))             heave: demand to climb rate
  //
  // "prior" is what you believe before the flight; it plans the excitation and does not pull the result.
  // effectiveness: roll, pitch, yaw in rad/s^2, heave in m/s^2, per unit of demand. damping in 1/s.
  // motor_lag, reaction_lead, delay in s; delay is the total one: latency plus half a sample.
  "axes": {
    "roll": {
      "channels": {
        "excitation": { "name": "excite_roll", "unit": "1" },
        "demand": { "name": "demand_roll", "unit": "1" },
        "output": { "name": "gyro_x", "scale": 1, "unit": "rad/s" }
      },
      "structure": "rate_motor_lag",
      "prior": { "effectiveness": 150, "damping": 1, "motor_lag": 0.05, "delay": 0.007 }
    },
    "pitch": {
      "channels": {
        "excitation": { "name": "excite_pitch", "unit": "1" },
        "demand": { "name": "demand_pitch", "unit": "1" },
        "output": { "name": "gyro_y", "scale": 1, "unit": "rad/s" }
      },
      "structure": "rate_motor_lag",
      "prior": { "effectiveness": 150, "damping": 1, "motor_lag": 0.05, "delay": 0.007 }
    },
    "yaw": {
      "channels": {
        "excitation": { "name": "excite_yaw", "unit": "1" },
        "demand": { "name": "demand_yaw", "unit": "1" },
        "output": { "name": "gyro_z", "scale": 1, "unit": "rad/s" }
      },
      "structure": "yaw_reaction",
      "prior": {
        "effectiveness": 10, "damping": 0.3, "motor_lag": 0.05, "reaction_lead": 0.1, "delay": 0.007
      }
    },
    "heave": {
      "channels": {
        "excitation": { "name": "excite_heave", "unit": "1" },
        "demand": { "name": "demand_heave", "unit": "1" },
        // Specific force along z (down) is about -9.8 m/s^2 at hover, hence the -1. The offset does no harm.
        "output": { "name": "accel_z", "scale": -1, "unit": "m/s^2" }
      },
      "structure": "heave_accel",
      "prior": { "effectiveness": 20, "damping": 0.5, "motor_lag": 0.05, "delay": 0.007 }
    }
  },

  // The gains flown now. A loop that is not flown is left out; an outer loop needs those inside it.
  // Parallel form: kp, ki, kd act on the error in rad/s, rad, m/s or m and put out the set point of the loop
  // inside, or the axis demand (rates and climb rate). kd acts on the measurement and needs
  // "derivative_cutoff_hz". "limit" bounds the output in its own unit. Velocity loops put out an acceleration
  // in m/s^2.
  "loops": {
    "roll_rate": { "kp": 0.07, "ki": 0.08, "kd": 0, "limit": 0.3 },
    "roll_angle": { "kp": 3.0, "limit": 1.5 },
    "pitch_rate": { "kp": 0.07, "ki": 0.08, "kd": 0, "limit": 0.3 },
    "pitch_angle": { "kp": 3.0, "limit": 1.5 },
    "yaw_rate": { "kp": 0.25, "ki": 0.15, "limit": 0.3 },
    "heading": { "kp": 1.2, "limit": 0.8 },
    "climb_rate": { "kp": 0.1, "ki": 0.05, "limit": 0.3 },
    "altitude": { "kp": 0.8, "limit": 1.5 },
    "velocity_x": { "kp": 1.2, "ki": 0.25, "limit": 3.5 },
    "position_x": { "kp": 0.5, "limit": 2.0 },
    "velocity_y": { "kp": 1.2, "ki": 0.25, "limit": 3.5 },
    "position_y": { "kp": 0.5, "limit": 2.0 }
  },

  // Only for rehearsing the flight in simulation; the rest of the chain does not look at it. Delete it if you
  // do not rehearse.
  "airframe": {
    "mass_kg": 2.0,
    "inertia_kg_m2": [0.03, 0.035, 0.055],  // Ixx, Iyy, Izz about the centre of gravity
    "thrust_max_n": 11,                     // one rotor, full command, still air; thrust ~ speed squared
    "speed_max_rad_s": 800,                 // rotor speed at full command
    "torque_per_thrust_m": 0.016,           // reaction torque over thrust
    "rotor_inertia_kg_m2": 4.0e-5,          // one rotor with motor bell
    "inflow_n_s_m": 0.4,                    // thrust lost per m/s of air from above, one rotor at hover
    "in_plane_drag_n_s_m": 0.05,            // drag per m/s of air speed in the rotor plane, one rotor
    "body_drag_area_m2": 0.02,              // drag coefficient times area
    "command_min": 0.03,                    // motor command that is never gone below, 0 to 1
    // One line per rotor, four or more: position from the centre of gravity (forward, right, down), spin as
    // seen from above, time constant of the speed.
    "rotors": [
      { "position_m": [0.18, 0.18, 0.0], "spin": "anticlockwise", "speed_lag_s": 0.045 },
      { "position_m": [-0.18, 0.18, 0.0], "spin": "clockwise", "speed_lag_s": 0.045 },
      { "position_m": [-0.18, -0.18, 0.0], "spin": "anticlockwise", "speed_lag_s": 0.045 },
      { "position_m": [0.18, -0.18, 0.0], "spin": "clockwise", "speed_lag_s": 0.045 }
    ],
    // Standard deviation of one sample, white.
    "noise": {
      "gyro_rad_s": 0.01, "accelerometer_m_s2": 0.15, "attitude_rad": 0.001,
      "position_m": 0.01, "velocity_m_s": 0.02
    },
    // Steady wind and where it comes from (0 north, 90 east); wind at 6 m that sets the turbulence (0 for
    // still air); height that sets the turbulence scales.
    "weather": { "wind_m_s": 4, "wind_from_deg": 250, "turbulence_wind_m_s": 6, "height_m": 10 }
  }
}
)";

}  // namespace

std::string vehicle_template(std::string_view name) {
  std::string quoted;
  try {
    quoted = nlohmann::json(name).dump();
  } catch (const nlohmann::json::type_error&) {
    throw Failure(FailureKind::bad_input, "the vehicle's name is not valid UTF-8 text", "", "");
  }
  if (name.empty()) throw Failure(FailureKind::bad_input, "the vehicle's name is empty", "", "");
  return std::string(kBeforeName) + quoted + std::string(kAfterName);
}

}  // namespace hoverwright::ident
