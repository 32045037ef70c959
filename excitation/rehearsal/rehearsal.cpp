// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/rehearsal.h"

#include <fmt/format.h>

#include <cmath>
#include <numbers>

#include "excitation/rehearsal/arms.h"
#include "excitation/rehearsal/controller.h"
#include "excitation/rehearsal/excursions.h"
#include "excitation/rehearsal/mixer.h"
#include "excitation/rehearsal/random.h"
#include "excitation/rehearsal/rigid_body.h"
#include "excitation/rehearsal/truth.h"
#include "excitation/rehearsal/turbulence.h"
#include "ident/failure.h"

namespace hoverwright::excitation {

namespace {

constexpr double kDegrees = 180.0 / std::numbers::pi;
constexpr double kLostTilt = 80.0 / kDegrees;

/// Sensors with white noise of their own streams; without noise they tell the truth.
class Sensors {
 public:
  Sensors(const ident::SensorNoise& noise, bool noisy, std::uint64_t seed)
      : noise_(noisy ? noise : ident::SensorNoise{}),
        gyro_(seed, NoiseSource::gyro),
        accelerometer_(seed, NoiseSource::accelerometer),
        attitude_(seed, NoiseSource::attitude),
        position_(seed, NoiseSource::position),
        velocity_(seed, NoiseSource::velocity) {}

  Measurement read(const RigidBody& body, const Air& air) {
    const MotionState& state = body.state();
    Measurement m;
    m.rate_rad_s = state.rate_rad_s + noise_.gyro_rad_s * gyro_.next3();
    m.attitude_rad = euler_angles(state.attitude) + noise_.attitude_rad * attitude_.next3();
    m.specific_force_m_s2 =
        body.specific_force_m_s2(air) + noise_.accelerometer_m_s2 * accelerometer_.next3();
    m.position_m = state.position_m + noise_.position_m * position_.next3();
    m.velocity_m_s = state.velocity_m_s + noise_.velocity_m_s * velocity_.next3();
    return m;
  }

 private:
  ident::SensorNoise noise_;
  NormalStream gyro_, accelerometer_, attitude_, position_, velocity_;
};

FlightLog make_log(double sample_rate_hz, Eigen::Index rows, Eigen::Index motors) {
  FlightLog log;
  log.sample_rate_hz = sample_rate_hz;
  log.time_s.resize(rows);
  log.excitation.resize(rows, 4);
  log.demand.resize(rows, 4);
  for (Eigen::MatrixX3d* signal :
       {&log.rate_rad_s, &log.attitude_rad, &log.specific_force_m_s2, &log.position_m, &log.velocity_m_s}) {
    signal->resize(rows, 3);
  }
  log.motor_command.resize(rows, motors);
  log.saturated.resize(rows);
  return log;
}

/// A vehicle that is lost ends its log early.
void shorten(FlightLog& log, TrueMotion& motion, Eigen::Index rows) {
  for (Eigen::VectorXd* signal :
       {&log.time_s, &motion.tilt_deg, &motion.rate_deg_s, &motion.drift_m, &motion.climb_m}) {
    signal->conservativeResize(rows);
  }
  log.excitation.conservativeResize(rows, 4);
  log.demand.conservativeResize(rows, 4);
  for (Eigen::MatrixX3d* signal :
       {&log.rate_rad_s, &log.attitude_rad, &log.specific_force_m_s2, &log.position_m, &log.velocity_m_s}) {
    signal->conservativeResize(rows, 3);
  }
  log.motor_command.conservativeResize(rows, log.motor_command.cols());
  log.saturated.conservativeResize(rows);
}

class Flight {
 public:
  Flight(const ident::Vehicle& vehicle, const Schedule& schedule, const RehearsalOptions& options)
      : schedule_(schedule),
        limits_(vehicle.limits),
        rate_hz_(vehicle.control.sample_rate_hz),
        settle_rows_(std::llround(options.settle_s * rate_hz_)),
        hover_command_(hover_command(*vehicle.airframe)),
        hover_point_m_(0.0, 0.0, -vehicle.airframe->weather.height_m),
        mixer_(*vehicle.airframe),
        plant_(*vehicle.airframe, rate_hz_, vehicle.control.latency_s),
        wind_(vehicle.airframe->weather, options.turbulence, rotor_span_m(*vehicle.airframe), rate_hz_,
              options.seed),
        sensors_(vehicle.airframe->noise, options.sensor_noise, options.seed),
        controller_(vehicle, hover_command_, options.position_loops, options.altitude_loops) {
    plant_.body().state().position_m = hover_point_m_;
    const auto rows = static_cast<Eigen::Index>(std::llround(schedule.duration_s * rate_hz_));
    log_ = make_log(rate_hz_, rows, static_cast<Eigen::Index>(vehicle.airframe->rotors.size()));
    for (Eigen::VectorXd* signal :
         {&motion_.tilt_deg, &motion_.rate_deg_s, &motion_.drift_m, &motion_.climb_m}) {
      signal->resize(rows);
    }
  }

  RehearsalResult fly() {
    bool diverged = false;
    const Eigen::Index rows = log_.time_s.size();
    for (Eigen::Index k = -settle_rows_; k < rows && !diverged; ++k) {
      sample(k);
      diverged = is_lost();
      if (diverged) shorten(log_, motion_, std::max<Eigen::Index>(0, k + 1));
    }
    RehearsalResult result;
    result.excursions = find_excursions(log_, motion_, schedule_, limits_, diverged);
    result.log = std::move(log_);
    return result;
  }

 private:
  /// One control sample: read, decide, record, fly on to the next. Rows below zero are the settling.
  void sample(Eigen::Index k) {
    const Air air = wind_.next();
    const Measurement measured = sensors_.read(plant_.body(), air);
    if (k == -settle_rows_) controller_.hold(measured, hover_point_m_, 0.0);
    const double time_s = static_cast<double>(k) / rate_hz_;
    const Eigen::Vector4d excitation = k >= 0 ? schedule_.value(time_s) : Eigen::Vector4d::Zero();
    const Eigen::Vector4d demand = controller_.step(measured) + excitation;
    const Mixer::Result mixed = mixer_.mix(demand, hover_command_);
    if (k >= 0) record(k, time_s, excitation, demand, measured, mixed);
    plant_.advance(mixed.command, air);
  }

  void record(Eigen::Index k, double time_s, const Eigen::Vector4d& excitation, const Eigen::Vector4d& demand,
              const Measurement& m, const Mixer::Result& mixed) {
    log_.time_s(k) = time_s;
    log_.excitation.row(k) = excitation.transpose();
    log_.demand.row(k) = demand.transpose();
    log_.rate_rad_s.row(k) = m.rate_rad_s.transpose();
    log_.attitude_rad.row(k) = m.attitude_rad.transpose();
    log_.specific_force_m_s2.row(k) = m.specific_force_m_s2.transpose();
    log_.position_m.row(k) = m.position_m.transpose();
    log_.velocity_m_s.row(k) = m.velocity_m_s.transpose();
    log_.motor_command.row(k) = mixed.command.transpose();
    log_.saturated(k) = mixed.saturated;

    const MotionState& state = plant_.body().state();
    motion_.tilt_deg(k) = tilt_rad(state.attitude) * kDegrees;
    motion_.rate_deg_s(k) = state.rate_rad_s.cwiseAbs().maxCoeff() * kDegrees;
    motion_.drift_m(k) = (state.position_m - hover_point_m_).head<2>().norm();
    motion_.climb_m(k) = hover_point_m_.z() - state.position_m.z();
  }

  [[nodiscard]] bool is_lost() const {
    const MotionState& state = plant_.body().state();
    const bool finite =
        state.position_m.allFinite() && state.rate_rad_s.allFinite() && state.attitude.coeffs().allFinite();
    return !finite || tilt_rad(state.attitude) > kLostTilt;
  }

  const Schedule& schedule_;
  ident::Limits limits_;
  double rate_hz_;
  Eigen::Index settle_rows_;
  double hover_command_;
  Eigen::Vector3d hover_point_m_;
  Mixer mixer_;
  DelayedVehicle plant_;
  Wind wind_;
  Sensors sensors_;
  HoverController controller_;
  FlightLog log_;
  TrueMotion motion_;
};

}  // namespace

RehearsalResult rehearse(const ident::Vehicle& vehicle, const Schedule& schedule,
                         const RehearsalOptions& options) {
  if (!vehicle.airframe) {
    throw ident::Failure(ident::FailureKind::bad_input, "the vehicle file has no airframe to rehearse with",
                         "/airframe",
                         "add mass, inertia, rotors and thrust, or fly the schedule on the vehicle");
  }
  if (schedule.sample_rate_hz != vehicle.control.sample_rate_hz) {
    throw ident::Failure(ident::FailureKind::bad_input,
                         fmt::format("the schedule is for {} Hz, the control loop runs at {} Hz",
                                     schedule.sample_rate_hz, vehicle.control.sample_rate_hz),
                         "/control/sample_rate_hz", "plan the schedule again");
  }
  if (!(options.settle_s >= 0.0)) {
    throw ident::Failure(ident::FailureKind::bad_input,
                         fmt::format("cannot settle for {} s", options.settle_s), "settle_s", "");
  }
  return Flight(vehicle, schedule, options).fly();
}

}  // namespace hoverwright::excitation
