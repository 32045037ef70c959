// SPDX-License-Identifier: GPL-3.0-or-later
#include <cmath>
#include <numbers>

#include "ident/fitting/fitted_scale.h"
#include "ident/fitting/model_fit.h"
#include "ident/fitting/uncertainty.h"
#include "ident/fitting/usable_fit.h"

namespace hoverwright::ident {

// First order: d ln H = g dθ with g = (dH/dθ)/H, so ln|H| has variance Re(g) C Re(g)ᵀ and the phase Im(g) C
// Im(g)ᵀ.
ResponseBand response_band(const ModelFit& fit, const Eigen::VectorXd& frequency_hz) {
  require_usable(fit);
  const Structure& structure = Structure::find(fit.structure);
  const Eigen::VectorXd values = fit.values();
  const FittedScale scale(structure, fit.parameter("effectiveness").value < 0.0);
  Eigen::MatrixXcd jacobian;
  const Eigen::VectorXcd response =
      structure.sampled_response(values, frequency_hz, fit.sample_rate_hz, &jacobian);
  jacobian = response.cwiseInverse().asDiagonal() * jacobian * scale.slope(values).asDiagonal();

  constexpr double kDecibel = 20.0 / std::numbers::ln10, kDegree = 180.0 / std::numbers::pi;
  const double t = student_t(0.95, fit.residual_degrees_of_freedom);
  const auto half_width = [&](const Eigen::MatrixXd& g) -> Eigen::ArrayXd {
    return t * (g * fit.fitted_covariance).cwiseProduct(g).rowwise().sum().array().sqrt();
  };
  ResponseBand band;
  band.frequency_hz = frequency_hz;
  band.gain_db = kDecibel * response.array().abs().log();
  const Eigen::ArrayXd gain_half = kDecibel * half_width(jacobian.real());
  band.gain_low_db = band.gain_db.array() - gain_half;
  band.gain_high_db = band.gain_db.array() + gain_half;

  band.phase_deg.resize(response.size());
  for (Eigen::Index k = 0; k < response.size(); ++k) {
    const double step = k == 0 ? std::arg(response[0]) : std::arg(response[k] * std::conj(response[k - 1]));
    band.phase_deg[k] = kDegree * step + (k == 0 ? 0.0 : band.phase_deg[k - 1]);
  }
  const Eigen::ArrayXd phase_half = kDegree * half_width(jacobian.imag());
  band.phase_low_deg = band.phase_deg.array() - phase_half;
  band.phase_high_deg = band.phase_deg.array() + phase_half;
  return band;
}

}  // namespace hoverwright::ident
