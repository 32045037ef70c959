// SPDX-License-Identifier: GPL-3.0-or-later
// A real 27 g quadrotor flown closed loop with nothing excited (NanoBench, Ullah & Baca 2026, arXiv
// 2603.09908; BSD 3-Clause). The logs are not part of the project; the test runs where they are laid beside
// it.
#include <catch2/catch.hpp>
#include <filesystem>
#include <nlohmann/json.hpp>

#include "ident/files.h"
#include "tests/run_script.h"

using namespace hoverwright;
using tests::run_script;
using tests::ScriptResult;
using tests::TemporaryFolder;

namespace {

const std::filesystem::path kData =
    std::filesystem::path(HOVERWRIGHT_SOURCE_DIR).parent_path() / "shared" / "data" / "nano_quadrotor";

/// Columns as the data's own description gives them; y left and z up become y right and z down by scale.
const char* const kVehicle = R"json({
  "format": "hoverwright.vehicle/1",
  "name": "nano quadrotor",
  "time": { "name": "t", "unit": "s" },
  "control": { "sample_rate_hz": 500, "latency_s": 0.002 },
  "axes": {
    "roll": {
      "channels": { "demand": { "name": "pid_controller_roll", "unit": "1", "scale": 1e-4 },
                    "output": { "name": "imu_gyro_x", "unit": "rad/s" } },
      "structure": "rate_motor_lag"
    },
    "pitch": {
      "channels": { "demand": { "name": "pid_controller_pitch", "unit": "1", "scale": -1e-4 },
                    "output": { "name": "imu_gyro_y", "unit": "rad/s", "scale": -1 } },
      "structure": "rate_motor_lag"
    },
    "heave": {
      "channels": { "demand": { "name": "pid_controller_cmd_thrust", "unit": "1", "scale": 1.52590e-5 },
                    "output": { "name": "imu_acc_z", "unit": "g" } },
      "structure": "heave_accel"
    }
  }
})json";

}  // namespace

TEST_CASE(
    "nano quadrotor: without excitation the answer is direct, said to be biased, and no model is made") {
  if (!std::filesystem::exists(kData)) {
    WARN("the logs are not laid beside the project; nothing checked");
    return;
  }
  for (const std::string flight : {"flight_a.csv", "flight_b.csv"}) {
    INFO(flight);
    const TemporaryFolder folder;
    const std::string study = "'" + folder.path().string() + "'";
    ident::write_file(folder.path() / "vehicle.json", kVehicle);
    const std::string log = "'" + (kData / flight).string() + "'";
    const std::string program = HOVERWRIGHT_PROGRAM;

    const ScriptResult inspected =
        run_script(program + " inspect " + log + " --vehicle " + study + "/vehicle.json");
    INFO(inspected.output);
    CHECK(inspected.exit_code == 0);
    CHECK(inspected.output.find("100") != std::string::npos);
    CHECK(inspected.output.find("counted from 1970") != std::string::npos);

    const ScriptResult identified =
        run_script(program + " identify " + study + " --log " + log + " --from 8 --to 20");
    INFO(identified.output);
    CHECK(identified.exit_code == 3);
    CHECK(identified.output.find("feedback biases it") != std::string::npos);
    CHECK(identified.output.find("coherent") != std::string::npos);
    const auto responses = nlohmann::json::parse(ident::read_file(folder.path() / "responses.json"));
    CHECK(responses["axes"].size() == 3);
    const auto models = nlohmann::json::parse(ident::read_file(folder.path() / "models.json"));
    CHECK(models["axes"].empty());

    CHECK(run_script(program + " identify " + study + " --log " + log + " --from 8 --to 20 --responses-only")
              .exit_code == 0);
    CHECK(run_script(program + " gains " + study).exit_code == 3);
    CHECK(run_script(program + " report " + study).exit_code == 0);
  }
}
