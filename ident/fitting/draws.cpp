// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include <Eigen/Cholesky>

#include "ident/failure.h"
#include "ident/fitting/fitted_scale.h"
#include "ident/fitting/model_fit.h"
#include "ident/fitting/usable_fit.h"
#include "ident/normal_numbers.h"

namespace hoverwright::ident {
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
