// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>

#include "ident/vehicle/vehicle.h"

namespace hoverwright::excitation {

/// Axis demands (roll, pitch, yaw, heave; normalised) to motor commands. Columns are the pseudo-inverse of
/// the rotors' moment and thrust arms, each scaled so that one unit of demand moves the most affected motor
/// by one unit of command.
class Mixer {
 public:
  /// @throws Failure (bad_input) when the rotors cannot produce all four axes independently.
  explicit Mixer(const ident::Airframe& airframe);
  [[nodiscard]] const Eigen::MatrixXd& matrix() const { return matrix_; }  ///< rotors × 4

  struct Result {
    Eigen::VectorXd command;  ///< 0..1 per rotor: thrust share of full thrust
    bool saturated = false;
  };
  /// hover_command + matrix · demand; on saturation yaw gives way first, then collective thrust shifts, then
  /// commands are clipped.
  [[nodiscard]] Result mix(const Eigen::Vector4d& demand, double hover_command) const;

 private:
  Eigen::MatrixXd matrix_;
  double command_min_;
};

}  // namespace hoverwright::excitation
