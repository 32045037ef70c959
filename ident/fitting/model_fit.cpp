// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/model_fit.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>

#include "ident/failure.h"
#include "ident/fitting/fit_search.h"
#include "ident/fitting/fitted_scale.h"
#include "ident/fitting/pair_errors.h"
#include "ident/fitting/uncertainty.h"

namespace hoverwright::ident {
namespace {

/// Errors ten times the noise: the interval widened by the residual no longer means anything.
constexpr double kAbsurdChiSquare = 100.0;
/// Inflation of the covariance by the variation over the flight worth a word: intervals half as wide again.
constexpr double kNotedVariation = 2.25;
/// Fewer complex points than this per parameter leave no residual to judge the fit by.
constexpr int kPointsPerParameter = 2;

[[noreturn]] void refuse(const std::string& problem, const std::string& advice = "") {
  throw Failure(FailureKind::bad_input, problem, "frequency response", advice);
}

void check(const FrequencyResponse& points) {
  if (!points.reference_based)
    throw Failure(
        FailureKind::unsupported,
        "no excitation channel: the response is the direct estimate, which feedback biases", "model fit",
        "log the excitation and fly the schedule; a model fitted to this would look confident and be wrong");
  const Eigen::Index n = points.points();
  if (points.a.size() != n || points.b.size() != n || static_cast<Eigen::Index>(points.noise.size()) != n ||
      points.degrees_of_freedom.size() != n || points.neighbour_correlation[0].size() != n ||
      points.neighbour_correlation[1].size() != n)
    refuse(fmt::format("{} frequencies, but the other columns have different lengths", n));
  if (!(points.sample_rate_hz > 0.0))
    refuse(fmt::format("sample rate {} Hz is not positive", points.sample_rate_hz));
  for (Eigen::Index k = 0; k < n; ++k) {
    const PairNoise& noise = points.noise[static_cast<std::size_t>(k)];
    const double f = points.frequency_hz[k];
    if (!(f > 0.0) || (k > 0 && f <= points.frequency_hz[k - 1]))
      refuse(fmt::format("frequency {} Hz of point {} is not positive and rising", f, k));
    if (!std::isfinite(std::norm(points.a[k])) || !std::isfinite(std::norm(points.b[k])))
      refuse(fmt::format("the point at {} Hz is not finite", f));
    // 1e-9: a covariance of rank one (noise that reaches the demand only through the controller) is
    // legitimate.
    if (!(noise.aa >= 0.0 && noise.bb >= 0.0 && noise.aa + noise.bb > 0.0) ||
        !(std::norm(noise.ab) <= noise.aa * noise.bb * (1.0 + 1e-9)))
      refuse(fmt::format("the noise covariance at {} Hz is not that of a noise", f));
  }
}

/// Why this many points with this noise estimate cannot carry the structure; empty if they can.
std::string too_little(const FrequencyResponse& points, const Structure& structure) {
  const auto parameters = static_cast<Eigen::Index>(structure.parameters().size());
  if (points.points() < kPointsPerParameter * parameters)
    return fmt::format(
        "{} points for {} parameters of {}: at least {} are needed; fly a longer record or a wider band",
        points.points(), parameters, structure.name(), kPointsPerParameter * parameters);
  if (!(points.degrees_of_freedom.minCoeff() > 2.0))
    return fmt::format(
        "the noise is estimated from {:.1f} degrees of freedom, more than 2 are needed: average more windows",
        points.degrees_of_freedom.minCoeff());
  return "";
}

/// Whether the output follows the demand at all: how far the fitted model lowers the cost below that of no
/// model (H = 0). Noise alone lowers it by one half for each parameter in the mean; six times that is asked.
bool beyond_noise(const FrequencyResponse& points, double cost, Eigen::Index parameters) {
  const auto nothing = pair_cost(points, Eigen::VectorXcd::Zero(points.points()));
  return !nothing || *nothing - cost > 3.0 * static_cast<double>(parameters);
}

/// Interval on the fitted scale, carried to values.
ParameterEstimate estimate(const ParameterSpec& spec, double value, double fitted_error, double t) {
  ParameterEstimate e;
  e.name = spec.name;
  e.unit = spec.unit;
  e.value = value;
  if (spec.logarithmic) {
    const double factor = std::exp(t * fitted_error);
    e.standard_error = std::abs(value) * fitted_error;
    e.low = std::min(value / factor, value * factor);
    e.high = std::max(value / factor, value * factor);
    e.identifiable = factor * factor <= 10.0;
  } else {
    e.standard_error = fitted_error;
    e.low = value - t * fitted_error;
    e.high = value + t * fitted_error;
    e.identifiable = e.low > 0.0 || e.high < 0.0;
  }
  return e;
}

void add_warnings(ModelFit& fit, const FitSearch& search) {
  const auto warn = [&](std::string text) { fit.warnings.push_back(std::move(text)); };
  if (fit.parameter("effectiveness").value < 0.0)
    warn(
        "effectiveness is negative: a positive demand moves the output the wrong way; the demand or the "
        "output channel is "
        "reversed (set its scale to -1 in the vehicle file)");
  if (fit.reduced_chi_square > 1.0 + 3.0 * std::sqrt(2.0 / fit.residual_degrees_of_freedom))
    warn(
        fmt::format("the model misses the points by {:.1f} times their noise: the structure is too simple "
                    "for this axis or the "
                    "excitation left its linear range; intervals are widened by that factor",
                    std::sqrt(fit.reduced_chi_square)));
  if (fit.flight_variation > kNotedVariation)
    warn(
        fmt::format("the stretches of the flight disagree {:.1f} times more than their noise explains: the "
                    "vehicle itself "
                    "changed with gusts, speed or battery; intervals are widened by that factor",
                    std::sqrt(fit.flight_variation)));
  const double damping_hz = std::abs(fit.parameter("damping").value) / (2.0 * std::numbers::pi);
  if (damping_hz < fit.band_low_hz)
    warn(
        fmt::format("damping: its pole at {:.2g} Hz lies below the measured band, which starts at {:.2g} Hz; "
                    "take its interval "
                    "seriously, not its value",
                    damping_hz, fit.band_low_hz));
  for (const auto& p : fit.parameters)
    if (!p.identifiable)
      warn(fmt::format("{} is not identifiable from these points: 95 % interval {:.3g} to {:.3g} {}", p.name,
                       p.low, p.high, p.unit));
  if (search.delay_held_at == 0.0)
    warn("delay ends at its limit zero: check whether demand and output are logged at the same instant");
  else if (fit.parameter("delay").value * fit.sample_rate_hz < 0.5)
    warn(
        "delay is shorter than the hold's half sample: check whether the output is logged later than the "
        "demand");
}

/// What the points leave open where the search ended without a minimum: two poles that want to be a complex
/// pair, or a parameter that drifts along a valley of equal cost. Empty if neither.
std::string open_end(const FitSearch& search, const Eigen::VectorXd& values,
                     const std::optional<FitUncertainty>& uncertainty, double confidence) {
  const Structure& structure = search.scale.structure();
  if (structure.has_parameter("motor_lag")) {
    const double lag = values[structure.index_of("motor_lag")];
    // Within a hundredth: closer than any data of this kind tells two poles apart.
    if (1.0 / lag - values[structure.index_of("damping")] < 0.01 / lag)
      return fmt::format("damping and motor lag end at the same pole, {:.2g} Hz: the points do not show two",
                         0.5 / (std::numbers::pi * lag));
  }
  if (!uncertainty) return "the points cannot tell the parameters of " + structure.name() + " apart";
  const double t = student_t(confidence, uncertainty->interval_degrees_of_freedom);
  for (Eigen::Index i = 0; i < values.size(); ++i) {
    const ParameterSpec& spec = structure.parameters()[static_cast<std::size_t>(i)];
    const auto e = estimate(spec, values[i], std::sqrt(uncertainty->covariance(i, i)), t);
    if (spec.logarithmic && !e.identifiable)
      return fmt::format(
          "{} drifts without changing the fit: the points do not determine it; a structure without it may do",
          spec.name);
  }
  return "";
}

std::string unsupported_reason(const ModelFit& fit) {
  if (fit.reduced_chi_square > kAbsurdChiSquare)
    return fmt::format(
        "the model misses the points by {:.0f} times their noise: {} does not describe this axis",
        std::sqrt(fit.reduced_chi_square), fit.structure);
  const ParameterEstimate& gain = fit.parameter("effectiveness");
  if (!gain.identifiable)
    return fmt::format(
        "effectiveness is not identifiable: 95 % interval {:.3g} to {:.3g} {}; fly a larger or longer "
        "excitation",
        gain.low, gain.high, gain.unit);
  return "";
}

}  // namespace

Eigen::VectorXd ModelFit::values() const {
  Eigen::VectorXd list(static_cast<Eigen::Index>(parameters.size()));
  for (std::size_t i = 0; i < parameters.size(); ++i)
    list[static_cast<Eigen::Index>(i)] = parameters[i].value;
  return list;
}

const ParameterEstimate& ModelFit::parameter(const std::string& name) const {
  for (const auto& p : parameters)
    if (p.name == name) return p;
  throw Failure(FailureKind::bad_input, fmt::format("the fit of {} has no parameter \"{}\"", structure, name),
                "", "");
}

double fit_cost(const FrequencyResponse& response, const Structure& structure,
                const Eigen::VectorXd& parameters) {
  check(response);
  const Eigen::VectorXcd model =
      structure.sampled_response(parameters, response.frequency_hz, response.sample_rate_hz);
  const auto cost = pair_cost(response, model);
  if (!cost) refuse("the variance of a - H b is not positive at these parameters");
  return *cost;
}

ModelFit fit_model(const FrequencyResponse& response, const Structure& structure, const FitOptions& options) {
  check(response);
  ModelFit fit;
  fit.structure = structure.name();
  fit.sample_rate_hz = response.sample_rate_hz;
  fit.points = static_cast<int>(response.points());
  if (response.points() > 0) {
    fit.band_low_hz = response.frequency_hz.minCoeff();
    fit.band_high_hz = response.frequency_hz.maxCoeff();
  }
  const auto not_supported = [&](std::string reason) {
    fit.status = FitStatus::not_supported;
    fit.reason = std::move(reason);
    return fit;
  };
  if (std::string reason = too_little(response, structure); !reason.empty())
    return not_supported(std::move(reason));

  const auto search = search_fit(response, structure, options.max_iterations);
  if (!search)
    return not_supported(
        "no model of this structure comes near the points: the excitation does not reach the demand");
  fit.iterations = search->iterations;
  if (!beyond_noise(response, search->cost, search->fitted.size()))
    return not_supported(
        "the output does not follow the demand beyond its noise; fly a larger or longer excitation");
  const Eigen::VectorXd values = search->scale.values(search->fitted);
  const auto uncertainty =
      fit_uncertainty(response, PairErrors(response, search->scale).linearise_at_model(search->fitted),
                      structure.sampled_response(values, response.frequency_hz, response.sample_rate_hz));
  if (!search->converged) {
    if (std::string reason = open_end(*search, values, uncertainty, options.confidence); !reason.empty())
      return not_supported(std::move(reason));
    fit.status = FitStatus::not_converged;
    fit.reason =
        fmt::format("the optimiser stopped after {} iterations without reaching a minimum", fit.iterations);
    return fit;
  }
  if (!uncertainty)
    return not_supported("the points cannot tell the parameters of " + structure.name() + " apart");

  fit.fitted_covariance = uncertainty->covariance;
  fit.reduced_chi_square = uncertainty->reduced_chi_square;
  fit.residual_degrees_of_freedom = uncertainty->residual_degrees_of_freedom;
  fit.flight_variation = uncertainty->flight_variation;
  const Eigen::VectorXd slope = search->scale.slope(values);
  fit.covariance = slope.asDiagonal() * fit.fitted_covariance * slope.asDiagonal();
  const double t = student_t(options.confidence, uncertainty->interval_degrees_of_freedom);
  for (Eigen::Index i = 0; i < values.size(); ++i)
    fit.parameters.push_back(estimate(structure.parameters()[static_cast<std::size_t>(i)], values[i],
                                      std::sqrt(fit.fitted_covariance(i, i)), t));
  add_warnings(fit, *search);
  if (std::string reason = unsupported_reason(fit); !reason.empty()) return not_supported(std::move(reason));
  fit.status = FitStatus::converged;
  return fit;
}

}  // namespace hoverwright::ident
