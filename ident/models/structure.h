// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <complex>
#include <string>
#include <string_view>
#include <vector>

#include "ident/models/transfer_function.h"

namespace hoverwright::ident {

/// One parameter of a structure.
struct ParameterSpec {
  std::string name;          ///< as in files: effectiveness, damping, motor_lag, reaction_lead, delay
  std::string unit;          ///< per unit of (normalised) demand for the effectiveness
  bool logarithmic = false;  ///< positive by construction, fitted as its logarithm
  double typical_low = 0.0, typical_high = 0.0;
};

struct AxisNumbers;

/// Axis model: a rational function with distinct real poles times a delay,
///   rate_damped     K / (s + a)
///   rate_motor_lag  K / ((s + a)(T s + 1))
///   yaw_reaction    K (T_z s + 1) / ((s + a)(T s + 1))
///   heave_accel     K s / ((s + a)(T s + 1))
///   climb_rate      K / ((s + a)(T s + 1))
/// each times exp(-delay·s). `delay` is the total effective delay: the hold's half sample is included.
/// Parameters in the order effectiveness K, damping a, motor_lag T, reaction_lead T_z, delay (those a
/// structure has).
class Structure {
 public:
  /// @throws Failure (bad_input) naming the nearest known structure.
  static const Structure& find(std::string_view name);
  static std::vector<std::string> names();

  [[nodiscard]] const std::string& name() const { return name_; }
  [[nodiscard]] const std::vector<ParameterSpec>& parameters() const { return parameters_; }
  /// Position of a parameter in `parameters()`.
  [[nodiscard]] Eigen::Index index_of(
      std::string_view parameter) const;  ///< @throws Failure (bad_input) if absent
  [[nodiscard]] bool has_parameter(std::string_view parameter) const;
  /// "K / ((s + a)(T s + 1)) exp(-delay s)" for screens.
  [[nodiscard]] const std::string& formula() const { return formula_; }

  /// Zeros, poles, gain and delay of the continuous model (delay as given, half sample included).
  [[nodiscard]] TransferFunction transfer_function(const Eigen::VectorXd& parameters) const;

  /// H(jω) with the total delay; optionally dH/dθ (points × parameters).
  Eigen::VectorXcd continuous_response(const Eigen::VectorXd& parameters, const Eigen::VectorXd& frequency_hz,
                                       Eigen::MatrixXcd* jacobian = nullptr) const;

  /// Exact response from demand samples to output samples when the demand is held between samples at
  /// `sample_rate_hz` (zero-order hold) and delayed by delay - half a sample, any fraction of a sample. A
  /// first-order block c/(s+p) delayed by τ contributes c z^-(d+1) [φ(m) + z^-1 (φ(Δ) - φ(m))] / (1 - e^{-pΔ}
  /// z^-1), φ(x) = (1 - e^{-px})/p, d = floor(τ/Δ), m = (d+1)Δ - τ (modified z-transform, Åström &
  /// Wittenmark, Computer-Controlled Systems, ch. 2). Analytic Jacobian on request. Continuous in the delay;
  /// where the delayed step response starts with a slope (one pole more than zeros) the derivative by the
  /// delay jumps at whole samples, and the value from the right is given there.
  Eigen::VectorXcd sampled_response(const Eigen::VectorXd& parameters, const Eigen::VectorXd& frequency_hz,
                                    double sample_rate_hz, Eigen::MatrixXcd* jacobian = nullptr) const;

 private:
  enum class Numerator { one, rate, lead };  // 1, s, T_z s + 1

  Structure(std::string name, std::string formula, Numerator numerator,
            std::vector<ParameterSpec> parameters);
  static const std::vector<Structure>& all();
  /// Sizes and signs checked. @throws Failure (bad_input)
  [[nodiscard]] AxisNumbers numbers(const Eigen::VectorXd& parameters) const;

  std::string name_;
  std::string formula_;
  Numerator numerator_;
  std::vector<ParameterSpec> parameters_;
};

}  // namespace hoverwright::ident
