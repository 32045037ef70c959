// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/rehearsal/mixer.h"

#include <fmt/format.h>

#include <Eigen/SVD>
#include <algorithm>
#include <cmath>
#include <limits>

#include "excitation/rehearsal/arms.h"
#include "ident/axis.h"
#include "ident/failure.h"

namespace hoverwright::excitation {

namespace {

constexpr Eigen::Index kYaw = 2, kHeave = 3;

/// The interval of x for which low <= base + x direction <= high in every entry; empty when first > second.
std::pair<double, double> feasible(const Eigen::VectorXd& base, const Eigen::VectorXd& direction, double low,
                                   double high) {
  double from = -std::numeric_limits<double>::infinity();
  double to = std::numeric_limits<double>::infinity();
  for (Eigen::Index i = 0; i < base.size(); ++i) {
    if (direction(i) == 0.0) continue;
    const double a = (low - base(i)) / direction(i);
    const double b = (high - base(i)) / direction(i);
    from = std::max(from, std::min(a, b));
    to = std::min(to, std::max(a, b));
  }
  return {from, to};
}

bool within(const Eigen::VectorXd& command, double low, double high) {
  return command.minCoeff() >= low && command.maxCoeff() <= high;
}

}  // namespace

Eigen::Matrix4Xd rotor_arms(const ident::Airframe& airframe) {
  Eigen::Matrix4Xd arms(4, static_cast<Eigen::Index>(airframe.rotors.size()));
  Eigen::Index column = 0;
  for (const ident::Rotor& rotor : airframe.rotors) {
    arms.col(column++) << -rotor.position_m.y(), rotor.position_m.x(),
        -rotor.spin * airframe.torque_per_thrust_m, 1.0;
  }
  return arms;
}

double rotor_span_m(const ident::Airframe& airframe) {
  double span = 0.0;
  for (const ident::Rotor& rotor : airframe.rotors)
    span = std::max(span, 2.0 * rotor.position_m.head<2>().norm());
  return span;
}

Mixer::Mixer(const ident::Airframe& airframe) : command_min_(airframe.command_min) {
  Eigen::MatrixXd arms = rotor_arms(airframe);
  // Rows are brought to one size first, or the small yaw arm would decide the rank by its unit.
  const Eigen::VectorXd size = arms.rowwise().norm();
  for (Eigen::Index axis = 0; axis < 4; ++axis) {
    if (size(axis) > 0.0) arms.row(axis) /= size(axis);
  }
  const Eigen::JacobiSVD<Eigen::MatrixXd> svd(arms, Eigen::ComputeThinU | Eigen::ComputeThinV);
  // Singular values are of order one when all axes can be reached; below 1e-6 an axis needs a million times
  // the thrust of another.
  if (arms.cols() < 4 || svd.singularValues()(3) < 1e-6) {
    throw ident::Failure(
        ident::FailureKind::bad_input,
        fmt::format("the {} rotors cannot turn about roll, pitch and yaw and lift independently",
                    arms.cols()),
        "/airframe/rotors", "check positions and spins, e.g. that not all rotors turn the same way");
  }
  matrix_ = svd.matrixV() * svd.singularValues().cwiseInverse().asDiagonal() * svd.matrixU().transpose();
  for (Eigen::Index axis = 0; axis < 4; ++axis) {
    matrix_.col(axis) /= matrix_.col(axis).cwiseAbs().maxCoeff();
  }
  // Rounding leaves 1e-17 where a rotor has no part in an axis; exact zeros keep saturation arithmetic clean.
  matrix_ = (matrix_.array().abs() < 1e-12).select(0.0, matrix_);
}

Mixer::Result Mixer::mix(const Eigen::Vector4d& demand, double hover_command) const {
  Result result;
  result.command = matrix_ * demand;
  result.command.array() += hover_command;
  if (within(result.command, command_min_, 1.0)) return result;

  result.saturated = true;
  const Eigen::VectorXd yaw = matrix_.col(kYaw) * demand(kYaw);
  result.command -= yaw;
  if (within(result.command, command_min_, 1.0)) {
    result.command += std::clamp(feasible(result.command, yaw, command_min_, 1.0).second, 0.0, 1.0) * yaw;
  } else {
    const auto [from, to] = feasible(result.command, matrix_.col(kHeave), command_min_, 1.0);
    const double shift = from <= to ? std::clamp(0.0, from, to) : 0.5 * (from + to);
    result.command += shift * matrix_.col(kHeave);
  }
  result.command = result.command.cwiseMax(command_min_).cwiseMin(1.0);
  return result;
}

}  // namespace hoverwright::excitation
