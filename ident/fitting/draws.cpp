// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include <Eigen/Cholesky>
#include <cmath>
#include <numbers>
#include <random>

#include "ident/failure.h"
#include "ident/fitting/fitted_scale.h"
#include "ident/fitting/model_fit.h"
#include "ident/fitting/usable_fit.h"

namespace hoverwright::ident {
namespace {

/// Standard normal numbers by Box & Muller (Ann. Math. Statist. 1958). std::normal_distribution differs
/// between libraries; this does not.
class NormalNumbers {
 public:
  explicit NormalNumbers(std::uint64_t seed) : engine_(seed) {}

  double next() {
    if (spare_) {
      const double value = *spare_;
      spare_.reset();
      return value;
    }
    const double radius = std::sqrt(-2.0 * std::log(uniform()));
    const double angle = 2.0 * std::numbers::pi * uniform();
    spare_ = radius * std::sin(angle);
    return radius * std::cos(angle);
  }

 private:
  /// In (0, 1], 53 bits.
  double uniform() { return (static_cast<double>(engine_() >> 11) + 1.0) * 0x1p-53; }

  std::mt19937_64 engine_;
  std::optional<double> spare_;
};

}  // namespace

Eigen::MatrixXd draw_parameters(const ModelFit& fit, int draws, std::uint64_t seed) {
  require_usable(fit);
  const Structure& structure = Structure::find(fit.structure);
  const FittedScale scale(structure, fit.parameter("effectiveness").value < 0.0);
  const Eigen::VectorXd centre = scale.fitted(fit.values());
  const Eigen::LLT<Eigen::MatrixXd> root(fit.fitted_covariance);
  if (root.info() != Eigen::Success)
    throw Failure(FailureKind::internal_error, "the covariance of the fit is not positive definite",
                  fit.structure, "");

  NormalNumbers normal(seed);
  Eigen::MatrixXd list(draws, centre.size());
  Eigen::VectorXd white(centre.size());
  for (int row = 0; row < draws; ++row) {
    // With a thousandth of the distribution in range a draw fails this often once in e^10.
    int attempts = 10000;
    while (true) {
      for (double& value : white) value = normal.next();
      const Eigen::VectorXd values = scale.values(centre + root.matrixL() * white);
      if (scale.in_range(values, fit.sample_rate_hz)) {
        list.row(row) = values.transpose();
        break;
      }
      if (--attempts == 0)
        throw Failure(FailureKind::unsupported, "nearly every draw of the parameters is out of range",
                      fit.structure,
                      "the fit is too uncertain to draw vehicles from; fly a longer or larger excitation");
    }
  }
  return list;
}

}  // namespace hoverwright::ident
