// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/models/structure.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <set>
#include <utility>

#include "ident/failure.h"
#include "ident/models/axis_numbers.h"
#include "ident/strict_json.h"

namespace hoverwright::ident {
namespace {

// Typical ranges: common practice for craft between a few hundred grams and some tens of kilograms. They
// guide a reader and a start, nothing is limited to them.
ParameterSpec effectiveness(double low, double high, std::string unit) {
  return {"effectiveness", std::move(unit), true, low, high};
}
const ParameterSpec kDamping{"damping", "1/s", false, 0.0, 5.0};
const ParameterSpec kMotorLag{"motor_lag", "s", true, 0.01, 0.2};
const ParameterSpec kReactionLead{"reaction_lead", "s", true, 0.01, 1.0};
const ParameterSpec kDelay{"delay", "s", false, 0.001, 0.05};

}  // namespace

Structure::Structure(std::string name, std::string formula, Numerator numerator,
                     std::vector<ParameterSpec> parameters)
    : name_(std::move(name)),
      formula_(std::move(formula)),
      numerator_(numerator),
      parameters_(std::move(parameters)) {}

const std::vector<Structure>& Structure::all() {
  static const std::vector<Structure> structures = [] {
    std::vector<Structure> list;
    list.push_back({"rate_damped",
                    "K / (s + a) exp(-delay s)",
                    Numerator::one,
                    {effectiveness(1.0, 1000.0, "rad/s^2"), kDamping, kDelay}});
    list.push_back({"rate_motor_lag",
                    "K / ((s + a)(T s + 1)) exp(-delay s)",
                    Numerator::one,
                    {effectiveness(10.0, 1000.0, "rad/s^2"), kDamping, kMotorLag, kDelay}});
    list.push_back({"yaw_reaction",
                    "K (T_z s + 1) / ((s + a)(T s + 1)) exp(-delay s)",
                    Numerator::lead,
                    {effectiveness(1.0, 100.0, "rad/s^2"), kDamping, kMotorLag, kReactionLead, kDelay}});
    list.push_back({"heave_accel",
                    "K s / ((s + a)(T s + 1)) exp(-delay s)",
                    Numerator::rate,
                    {effectiveness(5.0, 100.0, "m/s^2"), kDamping, kMotorLag, kDelay}});
    list.push_back({"climb_rate",
                    "K / ((s + a)(T s + 1)) exp(-delay s)",
                    Numerator::one,
                    {effectiveness(5.0, 100.0, "m/s^2"), kDamping, kMotorLag, kDelay}});
    return list;
  }();
  return structures;
}

const Structure& Structure::find(std::string_view name) {
  const auto& structures = all();
  const auto found = std::find_if(structures.begin(), structures.end(),
                                  [&](const Structure& s) { return s.name() == name; });
  if (found != structures.end()) return *found;
  const auto known = names();
  const std::string nearest = nearest_word(name, std::set<std::string>(known.begin(), known.end()));
  throw Failure(FailureKind::bad_input, fmt::format("unknown structure \"{}\"", name), "",
                fmt::format("did you mean \"{}\"? Known structures: {}", nearest, fmt::join(known, ", ")));
}

std::vector<std::string> Structure::names() {
  std::vector<std::string> list;
  for (const Structure& structure : all()) list.push_back(structure.name());
  return list;
}

bool Structure::has_parameter(std::string_view parameter) const {
  return std::any_of(parameters_.begin(), parameters_.end(),
                     [&](const ParameterSpec& p) { return p.name == parameter; });
}

Eigen::Index Structure::index_of(std::string_view parameter) const {
  for (std::size_t i = 0; i < parameters_.size(); ++i)
    if (parameters_[i].name == parameter) return static_cast<Eigen::Index>(i);
  std::vector<std::string> known;
  for (const auto& spec : parameters_) known.push_back(spec.name);
  throw Failure(FailureKind::bad_input, fmt::format("structure {} has no parameter \"{}\"", name_, parameter),
                "", fmt::format("its parameters are {}", fmt::join(known, ", ")));
}

AxisNumbers Structure::numbers(const Eigen::VectorXd& parameters) const {
  if (parameters.size() != static_cast<Eigen::Index>(parameters_.size()))
    throw Failure(
        FailureKind::bad_input,
        fmt::format("structure {} has {} parameters, {} given", name_, parameters_.size(), parameters.size()),
        "", "");
  for (std::size_t i = 0; i < parameters_.size(); ++i) {
    const double value = parameters[static_cast<Eigen::Index>(i)];
    // The effectiveness may be negative (reversed wiring): the fit reports that in words.
    const bool must_be_positive = parameters_[i].logarithmic && parameters_[i].name != "effectiveness";
    if (!std::isfinite(value) || (must_be_positive && value <= 0.0) || (i == 0 && value == 0.0))
      throw Failure(
          FailureKind::bad_input, fmt::format("{} of {} is {}", parameters_[i].name, name_, value), "",
          must_be_positive ? "it must be positive" : "it must be finite, the effectiveness not zero");
  }
  AxisNumbers n;
  n.gain = parameters[index_of("effectiveness")];
  n.damping = parameters[index_of("damping")];
  if (has_parameter("motor_lag")) n.lag = parameters[index_of("motor_lag")];
  n.lead_is_parameter = numerator_ == Numerator::lead;
  n.lead = numerator_ == Numerator::one    ? 0.0
           : numerator_ == Numerator::rate ? 1.0
                                           : parameters[index_of("reaction_lead")];
  n.constant = numerator_ == Numerator::rate ? 0.0 : 1.0;
  n.delay = parameters[index_of("delay")];
  return n;
}

TransferFunction Structure::transfer_function(const Eigen::VectorXd& parameters) const {
  const AxisNumbers n = numbers(parameters);
  TransferFunction transfer;
  transfer.gain = n.gain * (n.lead != 0.0 ? n.lead : n.constant) / n.lag.value_or(1.0);
  if (n.lead != 0.0) transfer.zeros.emplace_back(-n.constant / n.lead);
  transfer.poles.emplace_back(-n.damping);
  if (n.lag) transfer.poles.emplace_back(-1.0 / *n.lag);
  transfer.delay_s = n.delay;
  return transfer;
}

Eigen::VectorXcd Structure::continuous_response(const Eigen::VectorXd& parameters,
                                                const Eigen::VectorXd& frequency_hz,
                                                Eigen::MatrixXcd* jacobian) const {
  using Complex = std::complex<double>;
  const AxisNumbers n = numbers(parameters);
  const double lag = n.lag.value_or(0.0);
  Eigen::VectorXcd response(frequency_hz.size());
  if (jacobian != nullptr) jacobian->resize(frequency_hz.size(), parameters.size());
  for (Eigen::Index k = 0; k < frequency_hz.size(); ++k) {
    const Complex s(0.0, 2.0 * std::numbers::pi * frequency_hz[k]);
    const Complex slow = 1.0 / (s + n.damping);
    const Complex fast = 1.0 / (lag * s + 1.0);
    const Complex rest = slow * fast * std::polar(1.0, -s.imag() * n.delay);
    const Complex unit = (n.lead * s + n.constant) * rest;
    response[k] = n.gain * unit;
    if (jacobian == nullptr) continue;
    Eigen::Index column = 0;
    (*jacobian)(k, column++) = unit;
    (*jacobian)(k, column++) = -response[k] * slow;
    if (n.lag) (*jacobian)(k, column++) = -response[k] * s * fast;
    if (n.lead_is_parameter) (*jacobian)(k, column++) = n.gain * s * rest;
    (*jacobian)(k, column) = -response[k] * s;
  }
  return response;
}

Eigen::VectorXcd Structure::sampled_response(const Eigen::VectorXd& parameters,
                                             const Eigen::VectorXd& frequency_hz, double sample_rate_hz,
                                             Eigen::MatrixXcd* jacobian) const {
  if (!(sample_rate_hz > 0.0))
    throw Failure(FailureKind::bad_input, fmt::format("sample rate {} Hz is not positive", sample_rate_hz),
                  "", "");
  return sampled_axis_response(numbers(parameters), frequency_hz, sample_rate_hz, jacobian);
}

}  // namespace hoverwright::ident
