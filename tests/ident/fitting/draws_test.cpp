// SPDX-License-Identifier: GPL-3.0-or-later
#include <Eigen/Dense>
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <vector>

#include "ident/failure.h"
#include "ident/fitting/model_fit.h"
#include "tests/ident/fitting/synthetic_axis.h"

using namespace hoverwright::ident;
using namespace hoverwright::tests;

namespace {

ModelFit roll_fit(double noise = 0.02) {
  SyntheticAxis axis = roll_axis();
  axis.noise = noise;
  std::mt19937_64 engine(21);
  ModelFit fit =
      fit_model(noisy_points(axis, exact_points(axis, true), true, engine), Structure::find(axis.structure));
  REQUIRE(fit.status == FitStatus::converged);
  return fit;
}

}  // namespace

TEST_CASE(
    "parameter draws: mean and covariance on the fitted scale are those of the fit, same seed same draws") {
  const ModelFit fit = roll_fit();
  constexpr int kDraws = 20000;
  const Eigen::MatrixXd draws = draw_parameters(fit, kDraws, 5);
  CHECK(draws == draw_parameters(fit, kDraws, 5));
  CHECK(draws.row(0) != draw_parameters(fit, 1, 6).row(0));
  // Prefix: asking for more draws does not change the first ones.
  CHECK(draws.topRows(10) == draw_parameters(fit, 10, 5));

  Eigen::MatrixXd fitted = draws;
  fitted.col(0) = draws.col(0).array().log();
  fitted.col(2) = draws.col(2).array().log();
  Eigen::VectorXd centre = fit.values();
  centre[0] = std::log(centre[0]);
  centre[2] = std::log(centre[2]);
  const Eigen::VectorXd deviation = fit.fitted_covariance.diagonal().cwiseSqrt();
  const Eigen::MatrixXd unit =
      (fitted.rowwise() - centre.transpose()) * deviation.cwiseInverse().asDiagonal();
  const Eigen::MatrixXd correlation =
      deviation.cwiseInverse().asDiagonal() * fit.fitted_covariance * deviation.cwiseInverse().asDiagonal();
  // Standard deviations over 20000 draws: mean 0.0071, second moments at most sqrt(2/20000) = 0.01; four of
  // each.
  CHECK(unit.colwise().mean().cwiseAbs().maxCoeff() < 0.029);
  CHECK((unit.transpose() * unit / kDraws - correlation).cwiseAbs().maxCoeff() < 0.04);
}

TEST_CASE("parameter draws: poles stay in order, delay not negative, sign kept") {
  ModelFit fit = roll_fit();
  // A wide fit: draws reach the other pole and a negative delay unless they are redrawn.
  fit.fitted_covariance = Eigen::Vector4d(0.01, 64.0, 0.25, 1e-4).asDiagonal();
  const Eigen::MatrixXd draws = draw_parameters(fit, 2000, 9);
  CHECK((draws.col(2).cwiseInverse() - draws.col(1)).minCoeff() > 0.0);
  CHECK(draws.col(3).minCoeff() >= 0.0);
  CHECK(draws.col(0).minCoeff() > 0.0);
}

TEST_CASE("parameter draws: a fit that allows no draw is refused, not looped on for ever") {
  ModelFit fit = roll_fit();
  fit.parameters[3].value = -0.5;  // a delay the structure does not allow
  CHECK_THROWS_WITH(draw_parameters(fit, 5, 1), Catch::Contains("out of range"));
  fit = roll_fit();
  fit.fitted_covariance = Eigen::MatrixXd::Identity(2, 2);
  CHECK_THROWS_WITH(draw_parameters(fit, 5, 1), Catch::Contains("different sizes"));
}

TEST_CASE("response band: equals the spread of the drawn responses, phase unwrapped") {
  const ModelFit fit = roll_fit();
  const Eigen::VectorXd f = exact_points(roll_axis(), false).frequency_hz;
  const ResponseBand band = response_band(fit, f);
  const Structure& structure = Structure::find(fit.structure);
  constexpr int kDraws = 4000;
  const Eigen::MatrixXd draws = draw_parameters(fit, kDraws, 5);
  Eigen::ArrayXd gain_square = Eigen::ArrayXd::Zero(f.size()), phase_square = gain_square;
  const Eigen::VectorXcd centre = structure.sampled_response(fit.values(), f, fit.sample_rate_hz);
  for (int i = 0; i < kDraws; ++i) {
    const Eigen::ArrayXcd ratio = structure.sampled_response(draws.row(i).transpose(), f, fit.sample_rate_hz)
                                      .cwiseQuotient(centre)
                                      .array()
                                      .log();
    gain_square += (20.0 / std::log(10.0) * ratio.real()).square() / kDraws;
    phase_square += (180.0 / std::numbers::pi * ratio.imag()).square() / kDraws;
  }
  // 1.96 to 1.99 (Student); the root mean square of 4000 draws has 1.1 % and second-order terms are a few per
  // cent: 8 %.
  const Eigen::ArrayXd gain_half = 0.5 * (band.gain_high_db - band.gain_low_db).array();
  const Eigen::ArrayXd phase_half = 0.5 * (band.phase_high_deg - band.phase_low_deg).array();
  CHECK((gain_half / (1.975 * gain_square.sqrt()) - 1.0).abs().maxCoeff() < 0.08);
  CHECK((phase_half / (1.975 * phase_square.sqrt()) - 1.0).abs().maxCoeff() < 0.08);

  // At 24 Hz: -90° of the integrator, -82° of the lag, -72° of the delay and no wrap on the way.
  CHECK(band.phase_deg[f.size() - 1] == Approx(-244.0).margin(6.0));
  CHECK((band.phase_deg.tail(f.size() - 1) - band.phase_deg.head(f.size() - 1)).maxCoeff() < 0.0);
  CHECK((band.gain_db.array() - 20.0 * centre.array().abs().log10()).abs().maxCoeff() < 1e-9);
}
