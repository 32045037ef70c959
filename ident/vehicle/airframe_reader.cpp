// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/vehicle/airframe_reader.h"

#include <fmt/format.h>

#include <string>

#include "ident/gravity.h"

namespace hoverwright::ident {
namespace {

constexpr std::size_t kFewestRotors = 4;  // four independent demands need four thrusts

Eigen::Vector3d read_triple(StrictObject& section, const std::string& key) {
  const nlohmann::json& values = section.array(key);
  if (values.size() != 3) section.fail(key, fmt::format("three numbers are needed, found {}", values.size()));
  Eigen::Vector3d triple;
  for (std::size_t i = 0; i < 3; ++i) {
    if (!values[i].is_number()) section.fail(key, "three numbers are needed, one of these is something else");
    triple[static_cast<Eigen::Index>(i)] = values[i].get<double>();
  }
  return triple;
}

Eigen::Vector3d read_inertia(StrictObject& section) {
  const std::string key = "inertia_kg_m2";
  const Eigen::Vector3d inertia = read_triple(section, key);
  if (inertia.minCoeff() <= 0.0) section.fail(key, "all three moments of inertia must be greater than zero");
  // Each moment is at most the sum of the other two, with equality for a flat plate: allow for its rounding.
  if (2.0 * inertia.maxCoeff() > inertia.sum() * (1.0 + 1e-9)) {
    section.fail(key, "no body has these moments of inertia: one is larger than the sum of the other two",
                 "Order: Ixx, Iyy, Izz about the centre of gravity, in kg m^2.");
  }
  return inertia;
}

Rotor read_rotor(StrictObject section) {
  Rotor rotor;
  rotor.position_m = read_triple(section, "position_m");
  const std::string spin = section.text("spin");
  if (spin != "clockwise" && spin != "anticlockwise") {
    section.fail("spin", fmt::format("unknown spin direction \"{}\"", spin),
                 "Write \"clockwise\" or \"anticlockwise\", as seen from above.");
  }
  rotor.spin = spin == "clockwise" ? 1 : -1;
  rotor.speed_lag_s = section.positive("speed_lag_s");
  section.finish();
  return rotor;
}

std::vector<Rotor> read_rotors(StrictObject& section) {
  const nlohmann::json& list = section.array("rotors");
  if (list.size() < kFewestRotors) {
    section.fail("rotors",
                 fmt::format("at least {} rotors are needed, found {}", kFewestRotors, list.size()));
  }
  std::vector<Rotor> rotors;
  for (std::size_t i = 0; i < list.size(); ++i) {
    rotors.push_back(
        read_rotor({list[i], section.source(), fmt::format("{}/{}", section.pointer("rotors"), i)}));
  }
  return rotors;
}

SensorNoise read_noise(StrictObject section) {
  SensorNoise noise;
  noise.gyro_rad_s = section.optional_non_negative("gyro_rad_s").value_or(noise.gyro_rad_s);
  noise.accelerometer_m_s2 =
      section.optional_non_negative("accelerometer_m_s2").value_or(noise.accelerometer_m_s2);
  noise.attitude_rad = section.optional_non_negative("attitude_rad").value_or(noise.attitude_rad);
  noise.position_m = section.optional_non_negative("position_m").value_or(noise.position_m);
  noise.velocity_m_s = section.optional_non_negative("velocity_m_s").value_or(noise.velocity_m_s);
  section.finish();
  return noise;
}

Weather read_weather(StrictObject section) {
  Weather weather;
  weather.wind_m_s = section.optional_non_negative("wind_m_s").value_or(weather.wind_m_s);
  weather.wind_from_deg = section.optional_number("wind_from_deg").value_or(weather.wind_from_deg);
  weather.turbulence_wind_m_s =
      section.optional_non_negative("turbulence_wind_m_s").value_or(weather.turbulence_wind_m_s);
  weather.height_m = section.optional_positive("height_m").value_or(weather.height_m);
  section.finish();
  return weather;
}

}  // namespace

Airframe read_airframe(StrictObject section) {
  Airframe airframe;
  airframe.mass_kg = section.positive("mass_kg");
  airframe.inertia_kg_m2 = read_inertia(section);
  airframe.rotors = read_rotors(section);
  airframe.thrust_max_n = section.positive("thrust_max_n");
  airframe.speed_max_rad_s = section.positive("speed_max_rad_s");
  airframe.torque_per_thrust_m = section.positive("torque_per_thrust_m");
  airframe.rotor_inertia_kg_m2 =
      section.optional_non_negative("rotor_inertia_kg_m2").value_or(airframe.rotor_inertia_kg_m2);
  airframe.inflow_n_s_m = section.optional_non_negative("inflow_n_s_m").value_or(airframe.inflow_n_s_m);
  airframe.in_plane_drag_n_s_m =
      section.optional_non_negative("in_plane_drag_n_s_m").value_or(airframe.in_plane_drag_n_s_m);
  airframe.body_drag_area_m2 =
      section.optional_non_negative("body_drag_area_m2").value_or(airframe.body_drag_area_m2);
  airframe.command_min = section.optional_non_negative("command_min").value_or(airframe.command_min);
  if (airframe.command_min >= 1.0) {
    section.fail("command_min", fmt::format("must be below 1, is {}", airframe.command_min),
                 "Motor commands run from 0 to 1.");
  }
  if (auto noise = section.optional_object("noise")) airframe.noise = read_noise(*noise);
  if (auto weather = section.optional_object("weather")) airframe.weather = read_weather(*weather);
  section.finish();

  const double thrust = airframe.thrust_max_n * static_cast<double>(airframe.rotors.size());
  const double weight = airframe.mass_kg * kStandardGravity;
  if (thrust <= weight) {
    section.fail("thrust_max_n",
                 fmt::format("full thrust of all rotors is {:.4g} N, the weight {:.4g} N: this cannot hover",
                             thrust, weight),
                 "thrust_max_n is the thrust of one rotor at full command.");
  }
  return airframe;
}

}  // namespace hoverwright::ident
