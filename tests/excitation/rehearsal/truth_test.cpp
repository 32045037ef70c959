// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/truth.h"

#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>
#include <complex>
#include <map>
#include <numbers>
#include <vector>

#include "excitation/rehearsal/arms.h"
#include "excitation/rehearsal/mixer.h"
#include "excitation/rehearsal/rehearsal.h"
#include "excitation/rehearsal/rigid_body.h"
#include "ident/failure.h"
#include "ident/gravity.h"
#include "tests/excitation/rehearsal/vehicles.h"

using namespace hoverwright;
using excitation::AxisTruth;
using ident::Axis;
using std::numbers::pi;

namespace {

using Complex = std::complex<double>;

/// What the truth says of held demand samples: the model at the total delay times the hold's sinc. Images of
/// the sampled demand are left out: at 12 Hz the model is (12/388)² of itself there, 0.1 %.
Complex predicted(const AxisTruth& truth, double frequency_hz, double rate_hz) {
  const auto& p = truth.parameters;
  const Complex s(0.0, 2.0 * pi * frequency_hz);
  Complex h = p.at("effectiveness") / ((s + p.at("damping")) * (p.at("motor_lag") * s + 1.0));
  if (truth.structure == "yaw_reaction") h *= p.at("reaction_lead") * s + 1.0;
  if (truth.structure == "heave_accel") h *= s;
  const double x = pi * frequency_hz / rate_hz;
  return h * std::exp(-s * p.at("delay")) * std::sin(x) / x;
}

/// Drives the nonlinear vehicle in still air with a small multisine on one demand, no feedback at all, and
/// returns output over demand at its lines from the last of the periods.
std::map<double, Complex> measured(const ident::Vehicle& vehicle, Axis axis,
                                   const std::vector<double>& lines_hz) {
  const double rate = vehicle.control.sample_rate_hz;
  const double period_s = 10.0;
  const int samples = static_cast<int>(period_s * rate), periods = 8;
  const auto row = static_cast<Eigen::Index>(ident::axis_index(axis));
  const excitation::Mixer mixer(*vehicle.airframe);
  const double hover = excitation::hover_command(*vehicle.airframe);
  excitation::DelayedVehicle plant(*vehicle.airframe, rate, vehicle.control.latency_s);
  std::map<double, Complex> u, y;
  for (int k = 0; k < periods * samples; ++k) {
    const double t = (k % samples) / rate;
    double demand = 0.0;
    for (std::size_t i = 0; i < lines_hz.size(); ++i) {
      demand += 2e-4 * std::sin(2.0 * pi * lines_hz[i] * t + 2.4 * static_cast<double>(i * i));
    }
    const double output = axis == Axis::heave ? -plant.body().specific_force_m_s2(excitation::Air{}).z() -
                                                    ident::kStandardGravity
                                              : plant.body().state().rate_rad_s(row);
    if (k >= (periods - 1) * samples) {
      for (const double f : lines_hz) {
        const Complex turn = std::polar(1.0, -2.0 * pi * f * t);
        u[f] += demand * turn;
        y[f] += output * turn;
      }
    }
    Eigen::Vector4d demands = Eigen::Vector4d::Zero();
    demands(row) = demand;
    plant.advance(mixer.mix(demands, hover).command, excitation::Air{});
  }
  for (auto& [f, value] : y) value /= u[f];
  return y;
}

}  // namespace

TEST_CASE("truth: Tern's numbers by hand") {
  const ident::Vehicle vehicle = tests::tern();
  const ident::Airframe& a = *vehicle.airframe;
  const double c0 = a.mass_kg * ident::kStandardGravity / (4.0 * a.thrust_max_n);
  CHECK(excitation::hover_command(a) == Approx(c0));

  // Every mixer entry of a symmetric X is ±1.
  const AxisTruth roll = excitation::axis_truth(vehicle, Axis::roll);
  CHECK(roll.structure == "rate_motor_lag");
  CHECK(roll.parameters.at("effectiveness") == Approx(4.0 * 0.25 * a.thrust_max_n / a.inertia_kg_m2.x()));
  CHECK(roll.parameters.at("damping") == Approx(4.0 * a.inflow_n_s_m * 0.25 * 0.25 / a.inertia_kg_m2.x()));
  CHECK(roll.parameters.at("motor_lag") == Approx(0.045));
  CHECK(roll.parameters.at("delay") == Approx(0.006 + 0.00125));

  const AxisTruth pitch = excitation::axis_truth(vehicle, Axis::pitch);
  CHECK(pitch.parameters.at("effectiveness") == Approx(4.0 * 0.21 * a.thrust_max_n / a.inertia_kg_m2.y()));

  const AxisTruth yaw = excitation::axis_truth(vehicle, Axis::yaw);
  CHECK(yaw.structure == "yaw_reaction");
  CHECK(yaw.parameters.at("effectiveness") ==
        Approx(4.0 * a.torque_per_thrust_m * a.thrust_max_n / a.inertia_kg_m2.z()));
  CHECK(yaw.parameters.at("reaction_lead") ==
        Approx(a.rotor_inertia_kg_m2 * a.speed_max_rad_s / (2.0 * std::sqrt(c0)) /
               (a.torque_per_thrust_m * a.thrust_max_n)));

  const AxisTruth heave = excitation::axis_truth(vehicle, Axis::heave);
  CHECK(heave.structure == "heave_accel");
  CHECK(heave.parameters.at("effectiveness") == Approx(4.0 * a.thrust_max_n / a.mass_kg));
  CHECK(heave.parameters.at("damping") == Approx(4.0 * a.inflow_n_s_m / a.mass_kg));
}

TEST_CASE("truth: the nonlinear vehicle answers small demands as the linear parameters say") {
  // Hubs in the plane of the centre of gravity, as on Tern: otherwise sideways speed makes a moment, and
  // without feedback the vehicle leaves the hover point in a slow oscillation that no axis model here has.
  const std::vector<double> lines{0.5, 0.9, 1.7, 3.1, 6.0, 12.0};
  std::map<std::string, ident::Vehicle> vehicles{{"Tern", tests::tern()},
                                                 {"quad +", tests::ring_vehicle(4, 0.0)},
                                                 {"six", tests::ring_vehicle(6, 30.0)},
                                                 {"eight", tests::ring_vehicle(8, 22.5)}};
  for (auto& [name, vehicle] : vehicles) {
    for (ident::Rotor& rotor : vehicle.airframe->rotors) rotor.position_m.z() = 0.0;
    for (const Axis axis : ident::kAxes) {
      const AxisTruth truth = excitation::axis_truth(vehicle, axis);
      for (const auto& [f, value] : measured(vehicle, axis, lines)) {
        const Complex expected = predicted(truth, f, vehicle.control.sample_rate_hz);
        INFO(name << ", " << ident::axis_name(axis) << " at " << f << " Hz: " << value << " against "
                  << expected);
        CHECK(std::abs(value - expected) < 0.01 * std::abs(expected));
      }
    }
  }
}

TEST_CASE("truth: in a steady wind the slopes are those of the trimmed vehicle") {
  ident::Vehicle vehicle = tests::tern();
  const double wind = 9.0;
  vehicle.airframe->weather.wind_m_s = wind;
  vehicle.airframe->weather.wind_from_deg = 0.0;
  const ident::Airframe& airframe = *vehicle.airframe;
  excitation::RehearsalOptions options;
  options.turbulence = options.sensor_noise = false;
  options.settle_s = 120.0;
  const auto log = excitation::rehearse(vehicle, tests::quiet_schedule(vehicle, 1.0), options).log;
  const Eigen::Index last = log.time_s.size() - 1;
  const double command = log.motor_command.row(last).mean();

  // Put the vehicle into the trim the controller found, and take its slopes by small differences (second
  // order: 1e-6).
  excitation::Air air;
  air.velocity_m_s.x() = -wind;
  excitation::RigidBody body(airframe);
  body.state().attitude = Eigen::AngleAxisd(log.attitude_rad(last, 1), Eigen::Vector3d::UnitY());
  const auto lift = [&](double motor_command, double up_m_s) {
    body.state().rotor_speed_rad_s.setConstant(airframe.speed_max_rad_s * std::sqrt(motor_command));
    body.state().velocity_m_s = body.state().attitude * Eigen::Vector3d(0.0, 0.0, -up_m_s);
    return -body.specific_force_m_s2(air).z();
  };
  const AxisTruth heave = excitation::axis_truth(vehicle, Axis::heave, wind);
  const double effectiveness = (lift(command + 1e-3, 0.0) - lift(command - 1e-3, 0.0)) / 2e-3;
  const double damping = -(lift(command, 1e-3) - lift(command, -1e-3)) / 2e-3;
  // The logged trim is reached to 1e-4; damping leaves out sin² of the lean in the body's drag, 0.1 % of it.
  CHECK(heave.parameters.at("effectiveness") == Approx(effectiveness).epsilon(1e-4));
  CHECK(heave.parameters.at("damping") == Approx(damping).epsilon(1e-3));
  CHECK(effectiveness < 0.98 * excitation::axis_truth(vehicle, Axis::heave).parameters.at("effectiveness"));
  // The lead goes with 1/sqrt(command).
  const double lead_ratio = excitation::axis_truth(vehicle, Axis::yaw, wind).parameters.at("reaction_lead") /
                            excitation::axis_truth(vehicle, Axis::yaw).parameters.at("reaction_lead");
  CHECK(lead_ratio == Approx(std::sqrt(excitation::hover_command(airframe) / command)).epsilon(1e-4));
  CHECK_THROWS_AS(excitation::axis_truth(vehicle, Axis::yaw, 80.0), ident::Failure);
}

TEST_CASE("truth: another latency moves the delay, nothing else") {
  ident::Vehicle vehicle = tests::tern();
  vehicle.control.latency_s = 0.0131;
  for (const auto& [f, value] : measured(vehicle, Axis::roll, {1.0, 8.0})) {
    const Complex expected = predicted(excitation::axis_truth(vehicle, Axis::roll), f, 400.0);
    CHECK(std::abs(value - expected) < 0.01 * std::abs(expected));
  }
}

TEST_CASE("truth: a vehicle without airframe has none") {
  ident::Vehicle vehicle = tests::tern();
  vehicle.airframe.reset();
  CHECK_THROWS_AS(excitation::axis_truth(vehicle, Axis::roll), ident::Failure);
}
