// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/role_guess.h"

#include <catch2/catch.hpp>

using namespace hoverwright::ident;

TEST_CASE("role guess: names that speak, and names that do not") {
  CHECK(guess_role("gyro_x") == "roll output");
  CHECK(guess_role("gyroADC[1]") == "pitch output");
  CHECK(guess_role("yaw_rate") == "yaw output");
  CHECK(guess_role("accel_z") == "heave output");
  CHECK(guess_role("excite_heave") == "heave excitation");
  CHECK(guess_role("pid_controller_cmd_thrust") == "heave demand");
  CHECK(guess_role("timestamp") == "time");
  CHECK_FALSE(guess_role("sp_roll_rate"));
  CHECK_FALSE(guess_role("roll"));
  CHECK_FALSE(guess_role("accel_x"));
  CHECK_FALSE(guess_role("rate"));
  CHECK_FALSE(guess_role(""));
}
