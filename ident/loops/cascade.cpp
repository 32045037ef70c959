// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/cascade.h"

#include <fmt/format.h>

#include <string>

#include "ident/failure.h"
#include "ident/gravity.h"
#include "ident/loops/cascade_model.h"

namespace hoverwright::ident {
namespace {

bool turns(Axis axis) {
  return axis != Axis::heave;
}

void check_structure(Axis axis, const Structure& structure) {
  const bool heaves = structure.name() == "heave_accel" || structure.name() == "climb_rate";
  if (heaves == turns(axis))
    throw Failure(
        FailureKind::bad_input,
        fmt::format("structure {} does not describe the {} axis", structure.name(), axis_name(axis)), "",
        turns(axis) ? "roll, pitch and yaw take rate_damped, rate_motor_lag or yaw_reaction"
                    : "heave takes heave_accel or climb_rate");
}

/// Demand to rate (or climb rate), then one integrator or decay per outer level. States against the signal
/// flow, the outermost first and the motor last: every matrix is upper triangular.
StateSpace continuous_chain(const CascadeSetup& setup, const Structure& structure,
                            const Eigen::VectorXd& parameters) {
  const auto value = [&](const char* name) { return parameters[structure.index_of(name)]; };
  const Eigen::Index levels = static_cast<Eigen::Index>(loops_of_axis(setup.axis).size());
  const bool lag = structure.has_parameter("motor_lag");
  const Eigen::Index rate = levels - 1, size = levels + (lag ? 1 : 0);
  StateSpace chain{Eigen::MatrixXd::Zero(size, size), Eigen::MatrixXd::Zero(size, 1),
                   Eigen::MatrixXd::Zero(levels, size), Eigen::MatrixXd::Zero(levels, 1), 0.0};
  const double effectiveness = value("effectiveness");
  chain.a(rate, rate) = -value("damping");
  if (lag) {
    // x_m' = (u - x_m)/T drives the rate by K (x_m + T_z x_m'). For heave_accel the s of the numerator and
    // the integration to climb rate cancel, which leaves the same form.
    const double motor_lag = value("motor_lag");
    const double lead = structure.has_parameter("reaction_lead") ? value("reaction_lead") : 0.0;
    const Eigen::Index motor = rate + 1;
    chain.a(motor, motor) = -1.0 / motor_lag;
    chain.b(motor, 0) = 1.0 / motor_lag;
    chain.a(rate, motor) = effectiveness * (1.0 - lead / motor_lag);
    chain.b(rate, 0) = effectiveness * lead / motor_lag;
  } else {
    chain.b(rate, 0) = effectiveness;
  }
  for (Eigen::Index level = 1; level < levels; ++level) chain.a(rate - level, rate - level + 1) = 1.0;
  if (levels == 4) {  // angle to velocity: acceleration g · lean, slowed by drag
    chain.a(1, 2) = kStandardGravity;
    chain.a(1, 1) = -setup.speed_damping_1_s;
  }
  for (Eigen::Index level = 0; level < levels; ++level) chain.c(level, rate - level) = 1.0;
  return chain;
}

/// The delay states follow the chain in the order of the flow; turned round, the whole matrix is upper
/// triangular.
SampledStateSpace against_the_flow(const SampledStateSpace& sampled, Eigen::Index chain_states) {
  const Eigen::Index size = sampled.a.rows();
  Eigen::VectorXi order = Eigen::VectorXi::LinSpaced(size, 0, static_cast<int>(size) - 1);
  order.tail(size - chain_states).reverseInPlace();
  SampledStateSpace turned = sampled;
  for (Eigen::Index i = 0; i < size; ++i) {
    turned.b.row(i) = sampled.b.row(order[i]);
    turned.c.col(i) = sampled.c.col(order[i]);
    for (Eigen::Index j = 0; j < size; ++j) turned.a(i, j) = sampled.a(order[i], order[j]);
  }
  return turned;
}

}  // namespace

double output_factor(Axis axis, std::size_t level) {
  return (axis == Axis::roll || axis == Axis::pitch) && level == 2 ? 1.0 / kStandardGravity : 1.0;
}

std::vector<Loop> loops_of_axis(Axis axis) {
  switch (axis) {
    case Axis::roll:
      return {Loop::roll_rate, Loop::roll_angle, Loop::velocity_y, Loop::position_y};
    case Axis::pitch:
      return {Loop::pitch_rate, Loop::pitch_angle, Loop::velocity_x, Loop::position_x};
    case Axis::yaw:
      return {Loop::yaw_rate, Loop::heading};
    case Axis::heave:
      return {Loop::climb_rate, Loop::altitude};
  }
  throw Failure(FailureKind::internal_error, "unknown axis", "", "");
}

SampledStateSpace cascade_plant(const CascadeSetup& setup, const Structure& structure,
                                const Eigen::VectorXd& parameters) {
  check_structure(setup.axis, structure);
  if (!(setup.sample_rate_hz > 0.0))
    throw Failure(FailureKind::bad_input,
                  fmt::format("sample rate {} Hz is not positive", setup.sample_rate_hz), "", "");
  StateSpace chain = continuous_chain(setup, structure, parameters);
  const double half_sample_s = 0.5 / setup.sample_rate_hz;
  chain.input_delay_s = parameters[structure.index_of("delay")] - half_sample_s;
  // A thousandth of a sample of slack: the estimate of a delay of just half a sample carries rounding.
  if (chain.input_delay_s < 0.0 && chain.input_delay_s > -2e-3 * half_sample_s) chain.input_delay_s = 0.0;
  if (chain.input_delay_s < 0.0)
    throw Failure(
        FailureKind::unsupported,
        fmt::format(
            "{} axis: a delay of {:.5g} s is less than the half sample ({:.5g} s) any held demand has",
            axis_name(setup.axis), parameters[structure.index_of("delay")], half_sample_s),
        "", "check that demand and output are logged on one clock and not shifted against each other");
  return against_the_flow(sample_with_hold(chain, setup.sample_rate_hz), chain.a.rows());
}

std::vector<LoopGains> flown_gains(const CascadeSetup& setup, const LoopGainSet& gains) {
  std::vector<LoopGains> flown;
  std::string missing;
  for (const Loop loop : loops_of_axis(setup.axis)) {
    const auto& entry = gains[loop_index(loop)];
    if (!entry) {
      if (missing.empty()) missing = loop_name(loop);
      continue;
    }
    if (!missing.empty())
      throw Failure(FailureKind::bad_input,
                    fmt::format("{} has no {} loop inside it", loop_name(loop), missing),
                    fmt::format("/loops/{}", loop_name(loop)), fmt::format("give the gains of {}", missing));
    flown.push_back(*entry);
  }
  if (flown.empty())
    throw Failure(FailureKind::bad_input, fmt::format("the {} axis has no loops", axis_name(setup.axis)),
                  "/loops", fmt::format("give the gains of {}", missing));
  return flown;
}

CascadeAnalysis analyse_cascade(const CascadeSetup& setup, const LoopGainSet& gains,
                                const Structure& structure, const Eigen::VectorXd& parameters,
                                const Eigen::VectorXd& frequency_hz) {
  const std::vector<LoopGains> flown = flown_gains(setup, gains);
  const std::vector<Loop> loops = loops_of_axis(setup.axis);
  const SampledStateSpace plant = cascade_plant(setup, structure, parameters);
  std::vector<ControllerResponse> controllers;
  for (std::size_t i = 0; i < flown.size(); ++i)
    controllers.push_back(
        controller_response(flown[i], setup.sample_rate_hz, output_factor(setup.axis, i), frequency_hz));
  const CascadeGains open = cascade_gains(plant_responses(plant, frequency_hz),
                                          gyro_filter_response(setup, frequency_hz), controllers);

  CascadeAnalysis analysis;
  bool stable = false;
  for (std::size_t i = 0; i < flown.size(); ++i) {
    stable = spectral_radius(setup, plant, flown, i + 1) < 1.0;
    analysis.loops[loops[i]] = read_margins(frequency_hz, open.loops[i], stable);
  }
  analysis.at_demand = read_margins(frequency_hz, open.demand, stable);
  return analysis;
}

}  // namespace hoverwright::ident
