// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/validation.h"

#include <fmt/format.h>

#include <Eigen/Dense>
#include <cmath>

#include "ident/failure.h"
#include "ident/fitting/usable_fit.h"
#include "ident/models/state_space.h"

namespace hoverwright::ident {
namespace {

/// Columns: one, time, and C Aᵏ of the model's own states (what the axis still does from before the record),
/// each of unit size.
Eigen::MatrixXd unknown_responses(const StateSpace& model, double sample_rate_hz, Eigen::Index samples) {
  StateSpace undelayed = model;
  undelayed.input_delay_s = 0.0;
  const Eigen::MatrixXd transition = sample_with_hold(undelayed, sample_rate_hz).a;
  Eigen::MatrixXd columns(samples, 2 + transition.rows());
  columns.col(0).setOnes();
  columns.col(1) = Eigen::VectorXd::LinSpaced(samples, -1.0, 1.0);
  Eigen::RowVectorXd row = model.c;
  for (Eigen::Index k = 0; k < samples; ++k) {
    columns.row(k).tail(row.size()) = row;
    row = row * transition;
  }
  columns.colwise().normalize();
  return columns;
}

double rms(const Eigen::VectorXd& v) {
  return std::sqrt(v.squaredNorm() / static_cast<double>(v.size()));
}

}  // namespace

ValidationResult validate(const ModelFit& fit, const Eigen::VectorXd& demand, const Eigen::VectorXd& output) {
  require_usable(fit);
  if (demand.size() != output.size())
    throw Failure(FailureKind::bad_input,
                  fmt::format("{} demand samples, {} output samples", demand.size(), output.size()),
                  "validation", "");
  StateSpace model = state_space(Structure::find(fit.structure).transfer_function(fit.values()));
  model.input_delay_s -=
      0.5 / fit.sample_rate_hz;  // the hold is simulated, not approximated by half a sample
  const SampledStateSpace sampled = sample_with_hold(model, fit.sample_rate_hz);
  const Eigen::Index samples = output.size();
  // Twice as many samples as unknowns, and past the delay, or the least squares explains anything.
  const Eigen::Index needed = 2 * (2 + model.a.rows()) + sampled.a.rows();
  if (samples < needed)
    throw Failure(FailureKind::bad_input,
                  fmt::format("{} samples in the record, at least {} needed", samples, needed), "validation",
                  "");
  if (!demand.allFinite() || !output.allFinite())
    throw Failure(FailureKind::bad_input, "the record has samples that are not finite", "validation", "");

  // The mean of the demand is the trim: its response is an offset and a free response, fitted anyway.
  const Eigen::VectorXd moved = demand.array() - demand.mean();
  const Eigen::VectorXd forced = simulate(sampled, moved);
  const Eigen::MatrixXd columns = unknown_responses(model, fit.sample_rate_hz, samples);
  // Slow free responses look like offset and drift: the rank-revealing form keeps their sum, which is all
  // that matters.
  const Eigen::CompleteOrthogonalDecomposition<Eigen::MatrixXd> least_squares(columns);
  const Eigen::VectorXd simulated = forced + columns * least_squares.solve(output - forced);

  const double mean = output.mean();
  ValidationResult result;
  result.time_s =
      Eigen::VectorXd::LinSpaced(samples, 0.0, static_cast<double>(samples - 1) / fit.sample_rate_hz);
  result.measured = output.array() - mean;
  result.simulated = simulated.array() - mean;
  const Eigen::VectorXd error = result.measured - result.simulated;
  if (!(result.measured.squaredNorm() > 0.0))
    throw Failure(FailureKind::bad_input, "the output of the record does not move", "validation", "");
  result.fit_percent = 100.0 * (1.0 - error.norm() / result.measured.norm());
  result.theil_inequality = rms(error) / (rms(result.measured) + rms(result.simulated));
  return result;
}

}  // namespace hoverwright::ident
