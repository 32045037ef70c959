// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/gain_search.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <complex>
#include <cstdlib>
#include <limits>
#include <nlopt.hpp>
#include <numbers>
#include <numeric>
#include <utility>

#include "ident/failure.h"

namespace hoverwright::ident {
namespace {

using std::numbers::pi;
using Point = std::vector<double>;  // log kp, log ki, [log kd], [log kp of the angle loop]

// Kept in hand at the border so that gains printed with four digits (a change below 5e-4, which moves a slack
// by about as much) still meet the requirements.
constexpr double kGuard = 1e-3;
constexpr std::size_t kCriticalDraws = 30;
constexpr int kRefinements = 3;

/// Maps points to gains: the angle loop keeps the ratios ki/kp and kd/kp it is flown with.
struct Layout {
  std::vector<LoopGains> flown;
  bool derivative = false;
  double derivative_cutoff_hz = 0.0;

  [[nodiscard]] std::size_t angle_at() const { return derivative ? 3 : 2; }
  [[nodiscard]] std::size_t size() const { return angle_at() + (flown.size() == 2 ? 1 : 0); }

  [[nodiscard]] std::vector<LoopGains> gains(const Point& x) const {
    std::vector<LoopGains> tuned = flown;
    tuned[0].kp = std::exp(x[0]);
    tuned[0].ki = std::exp(x[1]);
    tuned[0].kd = derivative ? std::exp(x[2]) : 0.0;
    if (derivative) tuned[0].derivative_cutoff_hz = derivative_cutoff_hz;
    if (tuned.size() == 2) {
      const double kp = std::exp(x[angle_at()]);
      const double ratio = flown[1].kp > 0.0 ? kp / flown[1].kp : 0.0;
      tuned[1].kp = kp;
      tuned[1].ki *= ratio;
      tuned[1].kd *= ratio;
    }
    return tuned;
  }
};

/// Starts around the classic picture: crossover where the plant leaves the wanted phase margin and something
/// for integrator and angle loop, integral corner a sixth of it, angle bandwidth a quarter (common practice).
std::vector<Point> starting_points(const GainProblem& problem, const Layout& layout,
                                   double phase_margin_deg) {
  const Eigen::VectorXcd plant = problem.rate_plant();
  const Eigen::VectorXd& f = problem.frequency_hz();
  struct Style {
    double spare_deg, integral, angle, scale;
  };
  std::vector<Point> points;
  for (const Style& style :
       {Style{30.0, 6.0, 4.0, 1.0}, Style{20.0, 12.0, 3.0, 0.8}, Style{40.0, 4.0, 6.0, 0.5}}) {
    const double wanted = -pi + (phase_margin_deg + style.spare_deg) * pi / 180.0;
    double phase = std::arg(plant[0]);
    Eigen::Index k = 0;
    while (k + 1 < f.size() && (phase > wanted || f[k] < 0.1)) {
      phase += std::arg(plant[k + 1] / plant[k]);
      ++k;
    }
    const double omega = 2.0 * pi * f[k], kp = style.scale / std::abs(plant[k]);
    Point x{std::log(kp), std::log(kp * omega / style.integral)};
    if (layout.derivative) x.push_back(std::log(0.3 * kp / omega));
    if (layout.flown.size() == 2) x.push_back(std::log(style.scale * omega / style.angle));
    points.push_back(x);
  }
  const LoopGains& rate = layout.flown[0];
  if (rate.kp > 0.0 && (layout.flown.size() == 1 || layout.flown[1].kp > 0.0)) {
    Point x{std::log(rate.kp),
            rate.ki > 0.0 ? std::log(rate.ki) : points[0][1] - points[0][0] + std::log(rate.kp)};
    if (layout.derivative)
      x.push_back(rate.kd > 0.0 ? std::log(rate.kd) : points[0][2] - points[0][0] + std::log(rate.kp));
    if (layout.flown.size() == 2) x.push_back(std::log(layout.flown[1].kp));
    points.push_back(x);
  }
  return points;
}

/// One COBYLA run. Objective and constraints ask for the same point one after the other, so the last
/// evaluation is kept; the best point seen is kept too, since the final one of a nonsmooth problem need not
/// be it.
class Run {
 public:
  Run(const GainProblem& problem, const Layout& layout, std::vector<std::size_t> draws)
      : problem_(problem), layout_(layout), draws_(std::move(draws)) {}

  /// Best point: among those with enough slack the highest objective, else the one with the largest slack.
  Point best(const Point& start, double step, double tolerance, int evaluations) {
    nlopt::opt optimiser(nlopt::LN_COBYLA, static_cast<unsigned>(layout_.size()));
    optimiser.set_max_objective(
        [](const Point& x, Point&, void* self) { return static_cast<Run*>(self)->objective(x); }, this);
    const std::vector<double> tolerances(constraint_count(), 0.0);
    optimiser.add_inequality_mconstraint(
        [](unsigned count, double* result, unsigned size, const double* x, double*, void* self) {
          const std::vector<double> values = static_cast<Run*>(self)->constraints(Point(x, x + size));
          std::copy_n(values.begin(), count, result);
        },
        this, tolerances);
    optimiser.set_initial_step(step);
    optimiser.set_xtol_abs(tolerance);
    optimiser.set_maxeval(evaluations);
    best_ = start;
    look(start);
    Point x = start;
    double value = 0.0;
    try {
      optimiser.optimize(x, value);
    } catch (const nlopt::roundoff_limited&) {
      // The trust region has shrunk to rounding: the best point seen is the answer.
    }
    return best_;
  }

 private:
  [[nodiscard]] std::size_t constraint_count() const { return 2 * problem_.checks().size(); }

  void look(const Point& x) {
    if (x == looked_at_) return;
    last_ = problem_.evaluate_on(layout_.gains(x), draws_);
    looked_at_ = x;
    const double slack = last_.worst(), value = gain_objective(layout_.gains(x));
    const bool met = slack >= kGuard, best_met = best_slack_ >= kGuard;
    if (met != best_met ? met : (met ? value > best_objective_ : slack > best_slack_)) {
      best_ = x;
      best_slack_ = slack;
      best_objective_ = value;
    }
  }

  double objective(const Point& x) { return gain_objective(layout_.gains(x)); }

  std::vector<double> constraints(const Point& x) {
    look(x);
    std::vector<double> values;
    for (const double slack : last_.nominal) values.push_back(kGuard - slack);
    for (const double slack : last_.over_draws) values.push_back(kGuard - slack);
    return values;
  }

  const GainProblem& problem_;
  const Layout& layout_;
  std::vector<std::size_t> draws_;
  Point looked_at_, best_;
  GainEvaluation last_;
  double best_slack_ = -std::numeric_limits<double>::infinity(), best_objective_ = 0.0;
};

bool holds(const GainProblem& problem, const Layout& layout, const Point& x) {
  return problem.evaluate(layout.gains(x)).worst() >= kGuard;
}

/// Raises one coordinate to the border by bisection, to 1e-4.
void raise(const GainProblem& problem, const Layout& layout, Point& x, std::size_t coordinate) {
  const auto moved = [&](double rise) {
    Point point = x;
    point[coordinate] += rise;
    return point;
  };
  double low = 0.0, high = 0.02;
  while (high < 2.0 && holds(problem, layout, moved(high))) {
    low = high;
    high *= 2.0;
  }
  while (high - low > 1e-4) {
    const double middle = 0.5 * (low + high);
    (holds(problem, layout, moved(middle)) ? low : high) = middle;
  }
  x = moved(low);
}

/// Lowers the objective gains together, by as little as restores the requirements, at most by half.
bool pull_back(const GainProblem& problem, const Layout& layout, Point& x) {
  const auto moved = [&](double fall) {
    Point point = x;
    point[1] -= fall;
    if (layout.flown.size() == 2) point[layout.angle_at()] -= fall;
    return point;
  };
  if (holds(problem, layout, x)) return true;
  double low = 0.0, high = 0.01;
  while (!holds(problem, layout, moved(high))) {
    low = high;
    high *= 2.0;
    if (high > 0.7) return false;
  }
  while (high - low > 1e-4) {
    const double middle = 0.5 * (low + high);
    (holds(problem, layout, moved(middle)) ? high : low) = middle;
  }
  x = moved(high);
  return true;
}

/// The draws that decide at `x`: those that may fail are the ones furthest from meeting; the next ones must
/// meet.
std::vector<std::size_t> critical_draws(const GainProblem& problem, const Layout& layout, const Point& x) {
  const Eigen::VectorXd worst = problem.evaluate(layout.gains(x)).worst_of_draw;
  std::vector<std::size_t> order(problem.draws());
  std::iota(order.begin(), order.end(), std::size_t{0});
  std::stable_sort(order.begin(), order.end(), [&](std::size_t a, std::size_t b) {
    return worst[static_cast<Eigen::Index>(a)] < worst[static_cast<Eigen::Index>(b)];
  });
  const auto all = static_cast<double>(order.size());
  const std::size_t may_fail =
      order.size() - static_cast<std::size_t>(std::ceil(problem.share_of_draws() * all - 1e-9));
  const std::size_t last = std::min(order.size(), may_fail + kCriticalDraws);
  return {order.begin() + static_cast<std::ptrdiff_t>(may_fail),
          order.begin() + static_cast<std::ptrdiff_t>(last)};
}

/// From every start on the nominal model; the best point of those.
Point nominal_optimum(const GainProblem& problem, const Layout& layout, double phase_margin_deg) {
  Point best;
  double best_slack = 0.0, best_objective = 0.0;
  for (const Point& start : starting_points(problem, layout, phase_margin_deg)) {
    // Kinks in the constraints can stop a run early; two shorter ones from where it stopped get it going
    // again.
    Point x = start;
    for (const double step : {0.3, 0.2, 0.1}) x = Run(problem, layout, {}).best(x, step, 1e-3, 200);
    const double slack = std::min(kGuard, problem.evaluate_on(layout.gains(x), {}).worst());
    const double objective = gain_objective(layout.gains(x));
    if (best.empty() || slack > best_slack || (slack == best_slack && objective > best_objective)) {
      best = x;
      best_slack = slack;
      best_objective = objective;
    }
  }
  return best;
}

double four_digits(double value) {
  return std::strtod(fmt::format("{:.4g}", value).c_str(), nullptr);
}

std::vector<LoopGains> rounded(std::vector<LoopGains> gains) {
  for (LoopGains& loop : gains) {
    loop.kp = four_digits(loop.kp);
    loop.ki = four_digits(loop.ki);
    loop.kd = four_digits(loop.kd);
  }
  return gains;
}

/// The requirement that a rise of `coordinate` by 2 % breaks, of the nominal model or of the draw that is
/// then at the border of the share that must meet; with its tightest value, before the rise, among the draws
/// that meet.
std::string what_stops(const GainProblem& problem, const Layout& layout, const Point& x,
                       std::size_t coordinate, const GainEvaluation& at) {
  Point moved = x;
  moved[coordinate] += 0.02;
  const GainEvaluation beyond = problem.evaluate(layout.gains(moved));
  Eigen::Index check = 0, border = 0;
  if (beyond.nominal.minCoeff(&check) <= beyond.joint)
    return problem.words(problem.checks()[static_cast<std::size_t>(check)], at.nominal[check]) +
           ", nominal model";
  (beyond.worst_of_draw.array() - beyond.joint).abs().minCoeff(&border);
  beyond.drawn.row(border).minCoeff(&check);
  double tightest = std::numeric_limits<double>::infinity();
  for (Eigen::Index draw = 0; draw < at.drawn.rows(); ++draw) {
    if (at.worst_of_draw[draw] >= at.joint) tightest = std::min(tightest, at.drawn(draw, check));
  }
  return problem.words(problem.checks()[static_cast<std::size_t>(check)], tightest) +
         fmt::format(" at the {:.3g} % draw", 100.0 * (1.0 - problem.share_of_draws()));
}

}  // namespace

double gain_objective(const std::vector<LoopGains>& tuned) {
  if (tuned.size() == 1) return std::log(tuned[0].ki);
  return (std::log(tuned[0].ki) + 2.0 * std::log(tuned[1].kp)) / 3.0;
}

FoundGains search_gains(const GainProblem& problem, const std::vector<LoopGains>& start, bool use_derivative,
                        double derivative_cutoff_hz, double phase_margin_deg) {
  const Layout layout{start, use_derivative, derivative_cutoff_hz};
  Point x = nominal_optimum(problem, layout, phase_margin_deg);
  FoundGains found;
  found.nominal_can_meet = problem.evaluate_on(layout.gains(x), {}).worst() >= kGuard;
  double step = 0.1;
  for (int i = 0; found.nominal_can_meet && i < kRefinements; ++i, step *= 0.5)
    x = Run(problem, layout, critical_draws(problem, layout, x)).best(x, step, 3e-4, 120);

  if (pull_back(problem, layout, x)) {
    if (layout.flown.size() == 2) raise(problem, layout, x, layout.angle_at());
    raise(problem, layout, x, 1);
  }
  found.gains = rounded(layout.gains(x));
  found.evaluation = problem.evaluate(found.gains);
  found.meets = found.evaluation.worst() >= 0.0;
  found.objective = gain_objective(found.gains);
  if (!found.meets) return found;
  found.binding.push_back(what_stops(problem, layout, x, 1, found.evaluation));
  if (layout.flown.size() == 2)
    found.binding.push_back(what_stops(problem, layout, x, layout.angle_at(), found.evaluation));
  return found;
}

}  // namespace hoverwright::ident
