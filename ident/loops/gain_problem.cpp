// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/gain_problem.h"

#include <fmt/format.h>
#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>
#include <numeric>
#include <utility>

namespace hoverwright::ident {
namespace {

using Complex = std::complex<double>;

constexpr double kMost =
    1.0;  // slack beyond this counts no further: it keeps the optimiser's constraints in scale

double smallest_distance(const Eigen::VectorXcd& loop) {
  return (1.0 + loop.array()).abs().minCoeff();
}

/// k-th smallest of a column, k chosen so that the required share reaches or exceeds it.
double share_value(Eigen::VectorXd values, double share) {
  const auto count = static_cast<double>(values.size());
  // The small term keeps 0.95 · 200 from rounding up to 191.
  const auto must_reach = static_cast<Eigen::Index>(std::ceil(share * count - 1e-9));
  const Eigen::Index rank = std::clamp<Eigen::Index>(values.size() - must_reach, 0, values.size() - 1);
  std::nth_element(values.data(), values.data() + rank, values.data() + values.size());
  return values[rank];
}

}  // namespace

struct GainProblem::Controllers {
  Eigen::VectorXcd rate_error, rate_total;    ///< E_1, E_1 + D_1
  Eigen::VectorXcd angle_error, angle_total;  ///< E_2, E_2 + D_2
  double angle_kp = 0.0;
  double integral_corner_hz = 0.0;
  Eigen::VectorXd noise_gain;  ///< |F (E_1 + D_1)|² times bin width
};

struct GainProblem::OpenLoops {
  std::vector<Eigen::VectorXcd> at;  ///< by place
  std::vector<int> turns;
  double resonance = 0.0;
  std::optional<double> rate_crossover_hz;
  double integral_corner_hz = 0.0;
  double braking_share = 0.0;  ///< acceleration asked for over the one available
  double demand_noise_power = 0.0;
};

struct GainProblem::Stability {
  std::vector<int> turns;
  std::vector<bool> stable;
};

GainProblem::GainProblem(const CascadeSetup& setup, const DrawnModels& models, std::vector<LoopGains> present,
                         bool close_outer, double band_low_hz, double band_high_hz, double output_noise_psd,
                         const GainRequirements& requirements)
    : setup_(setup),
      models_(models),
      present_(std::move(present)),
      tuned_(std::min<std::size_t>(present_.size(), 2)),
      closed_(close_outer ? present_.size() : tuned_),
      band_low_hz_(band_low_hz),
      band_high_hz_(band_high_hz),
      output_noise_psd_(output_noise_psd),
      requirements_(requirements) {
  places_ = tuned_ == 1 ? std::vector{Place::rate_error}
                        : std::vector{Place::rate_error, Place::angle_error, Place::demand};
  for (const Place place : places_) {
    for (const Quantity quantity : {Quantity::gain_margin, Quantity::gain_reduction, Quantity::phase_margin,
                                    Quantity::sensitivity, Quantity::crossover_high})
      checks_.push_back({place, quantity});
    if (place == Place::rate_error) {
      checks_.push_back({place, Quantity::crossover_low});
      checks_.push_back({place, Quantity::integral_corner});
    }
    if (place != Place::angle_error) continue;
    checks_.push_back({place, Quantity::resonance});
    checks_.push_back({place, Quantity::separation});
    if (present_[0].limit && present_[1].limit) checks_.push_back({place, Quantity::braking});
  }
  if (output_noise_psd_ > 0.0) checks_.push_back({places_.back(), Quantity::demand_noise});

  const Eigen::VectorXd& f = models_.frequency_hz;
  const Eigen::Index last = f.size() - 1;
  band_edge_ =
      std::min<Eigen::Index>(std::lower_bound(f.data(), f.data() + f.size(), band_high_hz_) - f.data(), last);
  bin_width_hz_ = Eigen::VectorXd::Zero(f.size());
  for (Eigen::Index k = 0; k < last; ++k) {
    bin_width_hz_[k] += 0.5 * (f[k + 1] - f[k]);
    bin_width_hz_[k + 1] += 0.5 * (f[k + 1] - f[k]);
  }
  std::vector<ControllerResponse> outside;
  for (std::size_t i = 2; i < closed_; ++i)
    outside.push_back(
        controller_response(present_[i], setup_.sample_rate_hz, output_factor(setup_.axis, i), f));
  for (const Eigen::MatrixXcd& response : models_.responses) {
    filtered_rate_.emplace_back(models_.gyro_filter.cwiseProduct(response.col(0)));
    Eigen::VectorXcd outer = Eigen::VectorXcd::Zero(f.size());
    for (std::size_t i = outside.size(); i-- > 0;)
      outer = response.col(static_cast<Eigen::Index>(i) + 2)
                  .cwiseProduct(outside[i].error + outside[i].derivative) +
              outside[i].error.cwiseProduct(outer);
    outer_.push_back(std::move(outer));
  }
}

GainProblem::Controllers GainProblem::controllers(const std::vector<LoopGains>& tuned) const {
  const Eigen::VectorXd& f = models_.frequency_hz;
  const ControllerResponse rate = controller_response(tuned[0], setup_.sample_rate_hz, 1.0, f);
  Controllers c;
  c.rate_error = rate.error;
  c.rate_total = rate.error + rate.derivative;
  c.integral_corner_hz = tuned[0].ki / (2.0 * std::numbers::pi * tuned[0].kp);
  c.noise_gain = (models_.gyro_filter.cwiseProduct(c.rate_total)).cwiseAbs2().cwiseProduct(bin_width_hz_);
  if (tuned_ == 1) return c;
  const ControllerResponse angle = controller_response(tuned[1], setup_.sample_rate_hz, 1.0, f);
  c.angle_kp = tuned[1].kp;
  c.angle_error = angle.error;
  c.angle_total = angle.error + angle.derivative;
  return c;
}

/// With T = 1 + L_rate and N = E_1 P_1 (E_2 + D_2): L_angle = N/T, and L_demand = L_rate + N + E_1 E_2 X,
/// where X is what the outer loops feed back to the angle's set point.
GainProblem::OpenLoops GainProblem::open_loops(std::size_t model, const Controllers& c) const {
  const Eigen::VectorXcd& rate_plant = filtered_rate_[model];
  const Eigen::Index points = rate_plant.size();
  OpenLoops loops;
  loops.at.emplace_back(rate_plant.cwiseProduct(c.rate_total));
  loops.integral_corner_hz = c.integral_corner_hz;
  if (tuned_ == 2) {
    const auto angle_plant = models_.responses[model].col(1);
    const Eigen::VectorXcd& outer = outer_[model];
    Eigen::VectorXcd angle(points), demand(points);
    double peak = 0.0;
    for (Eigen::Index k = 0; k < points; ++k) {
      const Complex rate = loops.at[0][k], through = 1.0 + rate;
      const Complex inner = c.rate_error[k] * angle_plant[k];
      const Complex numerator = inner * c.angle_total[k];
      angle[k] = numerator * std::conj(through) / std::norm(through);
      demand[k] = rate + numerator + c.rate_error[k] * c.angle_error[k] * outer[k];
      peak = std::max(peak, std::norm(inner * c.angle_error[k]) / std::norm(through + numerator));
    }
    loops.resonance = std::sqrt(peak);
    // At the angle loop's limit r the P controller asks for the deceleration kp r; the demand limit u can
    // give K u.
    if (present_[0].limit && present_[1].limit)
      loops.braking_share =
          c.angle_kp * *present_[1].limit / (std::abs(models_.effectiveness[model]) * *present_[0].limit);
    loops.at.push_back(std::move(angle));
    loops.at.push_back(std::move(demand));
  }
  for (const Eigen::VectorXcd& loop : loops.at) loops.turns.push_back(turns_around_minus_one(loop));
  loops.demand_noise_power =
      output_noise_psd_ * c.noise_gain.cwiseQuotient((1.0 + loops.at.back().array()).abs2().matrix()).sum();
  return loops;
}

bool GainProblem::stable_by_poles(std::size_t model, std::size_t place,
                                  const std::vector<LoopGains>& tuned) const {
  std::vector<LoopGains> gains = present_;
  std::copy(tuned.begin(), tuned.end(), gains.begin());
  const std::size_t depth = places_[place] == Place::rate_error    ? 1
                            : places_[place] == Place::angle_error ? 2
                                                                   : closed_;
  return spectral_radius(setup_, models_.plants[model], gains, depth) < 1.0;
}

GainProblem::Stability GainProblem::nominal_stability(const OpenLoops& loops,
                                                      const std::vector<LoopGains>& tuned) const {
  Stability nominal{loops.turns, {}};
  for (std::size_t p = 0; p < places_.size(); ++p) nominal.stable.push_back(stable_by_poles(0, p, tuned));
  return nominal;
}

double GainProblem::slack(const Check& check, const Margins& margins, const OpenLoops& loops,
                          std::size_t place) const {
  const GainRequirements& need = requirements_;
  const auto against = [](const std::optional<double>& value, double limit) {
    return value ? *value / limit - 1.0 : kMost;
  };
  switch (check.quantity) {
    case Quantity::gain_margin: {
      if (margins.phase_crossover_hz && *margins.phase_crossover_hz <= band_high_hz_)
        return against(margins.gain_margin_db, need.gain_margin_db);
      const double edge_db = 20.0 * std::log10(std::abs(loops.at[place][band_edge_]));
      return -edge_db / need.gain_margin_db - 1.0;
    }
    case Quantity::gain_reduction:
      return against(margins.gain_reduction_db, need.gain_margin_db);
    case Quantity::phase_margin:
      return against(margins.phase_margin_deg, need.phase_margin_deg);
    case Quantity::sensitivity:
      return need.sensitivity_peak / margins.sensitivity_peak - 1.0;
    case Quantity::resonance:
      return kAngleResonance / loops.resonance - 1.0;
    case Quantity::integral_corner:
      if (loops.integral_corner_hz <= 0.0) return kMost;
      return margins.crossover_hz
                 ? std::log(*margins.crossover_hz / loops.integral_corner_hz / kIntegralSeparation)
                 : -1.0;
    case Quantity::separation:
      return margins.crossover_hz && loops.rate_crossover_hz
                 ? std::log(*loops.rate_crossover_hz / *margins.crossover_hz / kSeparation)
                 : kMost;
    case Quantity::braking:
      return 1.0 / loops.braking_share - 1.0;
    case Quantity::demand_noise:
      return need.demand_noise_rms / std::sqrt(loops.demand_noise_power) - 1.0;
    case Quantity::crossover_high:
      return margins.crossover_hz ? std::log(band_high_hz_ / *margins.crossover_hz) : kMost;
    case Quantity::crossover_low:
      return margins.crossover_hz ? std::log(*margins.crossover_hz / band_low_hz_) : -1.0;
  }
  return -1.0;
}

Eigen::VectorXd GainProblem::slacks(OpenLoops& loops, const std::vector<bool>& stable) const {
  Eigen::VectorXd values(static_cast<Eigen::Index>(checks_.size()));
  Eigen::Index row = 0;
  for (std::size_t p = 0; p < places_.size(); ++p) {
    const double unstable = stable[p] ? 0.0 : -1.0 - smallest_distance(loops.at[p]);
    const Margins margins = stable[p] ? read_margins(models_.frequency_hz, loops.at[p], true) : Margins{};
    if (places_[p] == Place::rate_error) loops.rate_crossover_hz = margins.crossover_hz;
    for (const Check& check : checks_) {
      if (check.place != places_[p]) continue;
      values[row++] = stable[p] ? std::min(kMost, slack(check, margins, loops, p)) : unstable;
    }
  }
  return values;
}

GainEvaluation GainProblem::evaluate(const std::vector<LoopGains>& tuned) const {
  std::vector<std::size_t> all(draws());
  std::iota(all.begin(), all.end(), std::size_t{0});
  return evaluate_share(tuned, all, requirements_.share_of_draws);
}

GainEvaluation GainProblem::evaluate_on(const std::vector<LoopGains>& tuned,
                                        const std::vector<std::size_t>& draws) const {
  return evaluate_share(tuned, draws, 1.0);
}

GainEvaluation GainProblem::evaluate_share(const std::vector<LoopGains>& tuned,
                                           const std::vector<std::size_t>& draws, double share) const {
  const Controllers c = controllers(tuned);
  OpenLoops nominal_loops = open_loops(0, c);
  const Stability nominal = nominal_stability(nominal_loops, tuned);
  GainEvaluation evaluation;
  evaluation.nominal = slacks(nominal_loops, nominal.stable);
  evaluation.over_draws = evaluation.nominal;
  evaluation.joint = evaluation.nominal.minCoeff();
  if (draws.empty()) return evaluation;

  Eigen::MatrixXd& drawn = evaluation.drawn;
  drawn.resize(static_cast<Eigen::Index>(draws.size()), static_cast<Eigen::Index>(checks_.size()));
  tbb::parallel_for(std::size_t{0}, draws.size(), [&](std::size_t i) {
    const std::size_t model = draws[i] + 1;
    OpenLoops loops = open_loops(model, c);
    // Same open-loop poles outside the unit circle and same turns as the nominal model: same closed-loop
    // poles outside it.
    const bool comparable = models_.open_loop_stable[model] == models_.open_loop_stable[0];
    std::vector<bool> stable(places_.size());
    for (std::size_t p = 0; p < places_.size(); ++p)
      stable[p] = comparable ? nominal.stable[p] && loops.turns[p] == nominal.turns[p]
                             : stable_by_poles(model, p, tuned);
    drawn.row(static_cast<Eigen::Index>(i)) = slacks(loops, stable).transpose();
  });
  for (Eigen::Index j = 0; j < drawn.cols(); ++j) evaluation.over_draws[j] = share_value(drawn.col(j), share);
  evaluation.worst_of_draw = drawn.rowwise().minCoeff();
  evaluation.joint = share_value(evaluation.worst_of_draw, share);
  return evaluation;
}

std::string GainProblem::words(const Check& check, double slack) const {
  const std::vector<Loop> loops = loops_of_axis(setup_.axis);
  const std::string place = check.place == Place::rate_error    ? fmt::format("of {}", loop_name(loops[0]))
                            : check.place == Place::angle_error ? fmt::format("of {}", loop_name(loops[1]))
                                                                : std::string("at the demand");
  const GainRequirements& need = requirements_;
  if (slack <= -1.0) return fmt::format("stability {}", place);
  switch (check.quantity) {
    case Quantity::gain_margin:
      return fmt::format("gain margin {}, {:.1f} dB (at least {:.1f})", place,
                         need.gain_margin_db * (1.0 + slack), need.gain_margin_db);
    case Quantity::gain_reduction:
      return fmt::format("gain reduction margin {}, {:.1f} dB (at least {:.1f})", place,
                         need.gain_margin_db * (1.0 + slack), need.gain_margin_db);
    case Quantity::phase_margin:
      return fmt::format("phase margin {}, {:.1f}° (at least {:.1f}°)", place,
                         need.phase_margin_deg * (1.0 + slack), need.phase_margin_deg);
    case Quantity::sensitivity:
      return fmt::format("sensitivity peak {}, {:.2f} (at most {:.2f})", place,
                         need.sensitivity_peak / (1.0 + slack), need.sensitivity_peak);
    case Quantity::resonance:
      return fmt::format("resonance {} from set point to angle, {:.2f} (at most {:.2f})", place,
                         kAngleResonance / (1.0 + slack), kAngleResonance);
    case Quantity::integral_corner:
      return fmt::format("integral corner {}, {:.1f} times below its crossover (at least {:.0f})", place,
                         kIntegralSeparation * std::exp(slack), kIntegralSeparation);
    case Quantity::separation:
      return fmt::format("crossover {}, {:.1f} times below that of {} (at least {:.0f})", place,
                         kSeparation * std::exp(slack), loop_name(loops[0]), kSeparation);
    case Quantity::braking:
      return fmt::format("braking {} from its limit, {:.0f} % of what the limit of {} can give", place,
                         100.0 / (1.0 + slack), loop_name(loops[0]));
    case Quantity::demand_noise:
      return fmt::format("noise {}, {:.4f} rms (at most {:.4f})", place,
                         need.demand_noise_rms / (1.0 + slack), need.demand_noise_rms);
    case Quantity::crossover_high:
      return fmt::format("crossover {}, {:.1f} Hz (measured up to {:.1f} Hz)", place,
                         band_high_hz_ * std::exp(-slack), band_high_hz_);
    case Quantity::crossover_low:
      return fmt::format("crossover {}, {:.2f} Hz (measured from {:.2f} Hz)", place,
                         band_low_hz_ * std::exp(slack), band_low_hz_);
  }
  return {};
}

}  // namespace hoverwright::ident
