// SPDX-License-Identifier: GPL-3.0-or-later
// Logs of a real quadrotor, read where they lie beside the project and left alone where they do not.
#include <catch2/catch.hpp>
#include <filesystem>

#include "ident/flight_log/channel_health.h"
#include "ident/flight_log/flight_data.h"
#include "ident/flight_log/records.h"

using namespace hoverwright::ident;

namespace {

const std::filesystem::path kFolder = HOVERWRIGHT_SOURCE_DIR "/../shared/data/nano_quadrotor";

}  // namespace

TEST_CASE("real log: rate, time and mapping of flights logged at 100 Hz with epoch stamps") {
  if (!std::filesystem::exists(kFolder)) {
    WARN("no real logs here");
    return;
  }
  for (const auto& [file, rows] : {std::pair{"flight_a.csv", 2868}, std::pair{"flight_b.csv", 4227}}) {
    const LogTable log = read_csv(kFolder / file);
    CHECK(log.names.size() == 52);
    CHECK(log.columns[0].size() == rows);
    const TimeHealth time = examine_time(log, "", 1.0);
    CHECK(time.name == "t");
    CHECK(time.epoch);
    CHECK(time.rate_hz == Approx(100.0).epsilon(1e-3));
    CHECK(time.duplicates == 0);
    CHECK(time.backward_steps == 0);
    CHECK(time.longest_gap_s < 0.02);

    Vehicle vehicle;
    vehicle.time = {"t", "s"};
    vehicle.control.sample_rate_hz = 500.0;
    AxisSetup heave;
    heave.structure = "heave_accel";
    heave.channels.demand = Channel{"pid_controller_cmd_thrust", 1.0 / 65535.0, "1"};
    heave.channels.output = Channel{"imu_acc_z", 1.0, "g"};
    vehicle.axes[axis_index(Axis::heave)] = heave;
    const FlightData data = map_log(log, vehicle, {});
    CHECK(data.samples == rows);
    const auto& signals = *data.axes[axis_index(Axis::heave)];
    CHECK(signals.output.mean() == Approx(9.8).epsilon(0.05));  // on the ground and in the air 1 g on average
    CHECK(signals.demand.maxCoeff() <= 1.0);
    CHECK(find_records(data).empty());
    REQUIRE(data.warnings.size() == 1);
    CHECK(data.warnings[0].find("the log runs at 100 Hz, the controller at 500 Hz") != std::string::npos);
  }
}
