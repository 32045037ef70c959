// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/fit_search.h"

#include <algorithm>
#include <cmath>
#include <vector>

#include "ident/fitting/levenberg_marquardt.h"
#include "ident/fitting/pair_errors.h"
#include "ident/fitting/start_grid.h"

namespace hoverwright::ident {
namespace {

constexpr std::size_t kStarts = 3;
/// Iterations with fixed weights that are worth their time before the weights are renewed.
constexpr int kApproachIterations = 12;
/// A twenty-thousandth of a standard error left to go: a search that stalls so near stalls at rounding.
constexpr double kRoundingDecrease = 1e-9;

/// Ends of the approach whose costs differ by less lie in one valley: the approach stops a twentieth of a
/// standard error short.
constexpr double kSameValley = 0.05;

/// Where one start led.
struct Approached {
  FittedScale scale;
  Eigen::VectorXd fitted;
  double cost;
};

/// Fixed weights first, then renewed twice at the model: the maximum-likelihood cost has its own valleys far
/// from the data.
Eigen::VectorXd approach(const PairErrors& errors, Eigen::VectorXd fitted, int& iterations) {
  MarquardtOptions options;
  options.max_iterations = kApproachIterations;
  options.decrease_tolerance = 1e-3;  // a twentieth of a standard error
  Eigen::VectorXd weights = start_weights(errors.points());
  for (int renewal = 0; renewal < 3; ++renewal) {
    const LeastSquaresProblem problem = errors.fixed_weights(weights);
    const MarquardtResult result = levenberg_marquardt(problem, fitted, options);
    iterations += result.iterations;
    const auto model = errors.response(result.parameters);
    if (!model) break;
    const Eigen::VectorXd variance = error_variance(errors.points(), *model);
    if (!(variance.array() > 0.0).all())
      break;  // the weights would not be finite: leave it to the exact cost
    fitted = result.parameters;
    weights = variance.cwiseInverse();
  }
  return fitted;
}

/// Descent by the delay just beside `fitted`, on the side asked for; the others as they are.
double delay_descent(const PairErrors& errors, Eigen::VectorXd fitted, Eigen::Index delay, double side_s) {
  fitted[delay] += side_s;
  return errors.linearise_at_model(fitted).descent()[delay];
}

/// A minimum where the cost has a corner in the delay: the others are optimised with the delay held there,
/// and the cost must rise to both sides. True if `search` was moved to one.
bool settle_at_corner(const PairErrors& errors, double delay_s, int max_iterations, FitSearch& search) {
  const Eigen::Index delay = errors.scale().structure().index_of("delay");
  const double sample_s = 1.0 / errors.points().sample_rate_hz;
  Eigen::VectorXd start = search.fitted;
  start[delay] = delay_s;
  const LeastSquaresProblem problem = errors.maximum_likelihood();
  if (!problem.cost(start)) return false;
  MarquardtOptions options;
  options.max_iterations = max_iterations;
  options.held = delay;
  const MarquardtResult held = levenberg_marquardt(problem, start, options);
  search.iterations += held.iterations;
  const bool at_minimum = held.converged || held.predicted_decrease < kRoundingDecrease;
  // To the sides by a millionth of a sample: past the rounding of the delay, before any curvature.
  const bool rises_above = delay_descent(errors, held.parameters, delay, 1e-6 * sample_s) <= 0.0;
  const bool rises_below =
      delay_s == 0.0 || delay_descent(errors, held.parameters, delay, -1e-6 * sample_s) >= 0.0;
  if (!at_minimum || !rises_above || !rises_below || held.cost > search.cost) return false;
  search.converged = true;
  search.fitted = held.parameters;
  search.cost = held.cost;
  search.delay_held_at = delay_s;
  return true;
}

/// Maximum likelihood from here.
FitSearch finish(const PairErrors& errors, const Eigen::VectorXd& start, int max_iterations) {
  MarquardtOptions options;
  options.max_iterations = max_iterations;
  const MarquardtResult result = levenberg_marquardt(errors.maximum_likelihood(), start, options);
  FitSearch search{result.converged || result.predicted_decrease < kRoundingDecrease,
                   errors.scale(),
                   result.parameters,
                   result.cost,
                   result.iterations,
                   std::nullopt};
  if (search.converged) return search;
  const double sample_s = 1.0 / errors.points().sample_rate_hz;
  const double delay_s = result.parameters[errors.scale().structure().index_of("delay")];
  const double whole =
      (std::floor(delay_s / sample_s) + 0.5) * sample_s;  // τ = delay - Δ/2 a whole number of samples
  std::vector<double> corners = {whole, whole - sample_s, whole + sample_s, 0.0};
  std::sort(corners.begin(), corners.end(),
            [&](double x, double y) { return std::abs(x - delay_s) < std::abs(y - delay_s); });
  for (double corner : {corners[0], corners[1]})
    if (corner >= 0.0 && settle_at_corner(errors, corner, max_iterations, search)) break;
  return search;
}

}  // namespace

std::optional<FitSearch> search_fit(const FrequencyResponse& points, const Structure& structure,
                                    int max_iterations) {
  int iterations = 0;
  std::vector<Approached> ends;
  for (const FitStart& start : start_grid(points, structure, kStarts)) {
    const FittedScale scale(structure, start.values[structure.index_of("effectiveness")] < 0.0);
    const PairErrors errors(points, scale);
    const LeastSquaresProblem exact = errors.maximum_likelihood();
    const Eigen::VectorXd first = scale.fitted(start.values);
    const auto first_cost = exact.cost(first);
    if (!first_cost) continue;
    const Eigen::VectorXd last = approach(errors, first, iterations);
    const auto last_cost = exact.cost(last);
    const bool nearer = last_cost && *last_cost < *first_cost;
    ends.push_back({scale, nearer ? last : first, nearer ? *last_cost : *first_cost});
  }
  std::stable_sort(ends.begin(), ends.end(),
                   [](const Approached& x, const Approached& y) { return x.cost < y.cost; });

  std::optional<FitSearch> best;
  for (std::size_t i = 0; i < ends.size(); ++i) {
    if (i > 0 && ends[i].cost - ends[0].cost < kSameValley) continue;
    const FitSearch search = finish(PairErrors(points, ends[i].scale), ends[i].fitted, max_iterations);
    iterations += search.iterations;
    if (!best || search.cost < best->cost) best = search;
    if (i > 0) break;  // the second valley was the last tried
  }
  if (best) best->iterations = iterations;
  return best;
}

}  // namespace hoverwright::ident
