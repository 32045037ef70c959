// SPDX-License-Identifier: GPL-3.0-or-later
#include <charconv>
#include <cmath>
#include <string>

#include "excitation/rehearsal/rehearsal.h"
#include "ident/axis.h"

namespace hoverwright::excitation {

namespace {

/// The shortest decimals that give back the single-precision value: 24 bits, about seven digits, what a
/// logger on board keeps.
void append(std::string& text, double value) {
  char digits[32];
  const auto end = std::to_chars(digits, digits + sizeof digits, static_cast<float>(value)).ptr;
  text.push_back(',');
  text.append(digits, end);
}

void append_time(std::string& text, double time_s) {
  char digits[64];
  const auto end = std::to_chars(digits, digits + sizeof digits, time_s, std::chars_format::fixed, 6).ptr;
  text.append(digits, end);
}

std::string header(Eigen::Index motors) {
  std::string text = "time_s";
  for (const char* kind : {"excite", "demand"}) {
    for (const ident::Axis axis : ident::kAxes)
      text.append(",").append(kind).append("_").append(ident::axis_name(axis));
  }
  text +=
      ",gyro_x,gyro_y,gyro_z,roll,pitch,heading,accel_x,accel_y,accel_z,north,east,down,"
      "velocity_north,velocity_east,velocity_down";
  for (Eigen::Index i = 1; i <= motors; ++i) text.append(",motor_").append(std::to_string(i));
  text.push_back('\n');
  return text;
}

}  // namespace

std::string log_to_csv(const FlightLog& log) {
  const Eigen::Index rows = log.time_s.size();
  const Eigen::Index columns = 23 + log.motor_command.cols();
  std::string text = header(log.motor_command.cols());
  text.reserve(text.size() + static_cast<std::size_t>(rows * columns) * 12);
  for (Eigen::Index k = 0; k < rows; ++k) {
    append_time(text, log.time_s(k));
    for (Eigen::Index i = 0; i < 4; ++i) append(text, log.excitation(k, i));
    for (Eigen::Index i = 0; i < 4; ++i) append(text, log.demand(k, i));
    for (const Eigen::MatrixX3d* signal :
         {&log.rate_rad_s, &log.attitude_rad, &log.specific_force_m_s2, &log.position_m, &log.velocity_m_s}) {
      for (Eigen::Index i = 0; i < 3; ++i) append(text, (*signal)(k, i));
    }
    for (Eigen::Index i = 0; i < log.motor_command.cols(); ++i) append(text, log.motor_command(k, i));
    text.push_back('\n');
  }
  return text;
}

}  // namespace hoverwright::excitation
