// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <algorithm>
#include <string>
#include <vector>

#include "ident/loops/drawn_models.h"

namespace hoverwright::ident {

/// What a set of gains is held against, and where.
enum class Place { rate_error, angle_error, demand };
enum class Quantity {
  gain_margin,  ///< read inside the measured band; where the phase crosses -180° above it, the gain at its
                ///< edge instead
  gain_reduction,
  phase_margin,
  sensitivity,
  resonance,        ///< peak from the angle's set point to the angle
  integral_corner,  ///< of the rate loop, ki/(2π kp), well below its gain crossover
  separation,       ///< gain crossover of the angle loop well below the rate loop's
  braking,          ///< the angle loop asks for no faster braking than the rate loop's output limit can give
  demand_noise,
  crossover_high,  ///< gain crossover below the top of the measured band
  crossover_low,   ///< the rate loop's gain crossover above its bottom
};
struct Check {
  Place place;
  Quantity quantity;
};

/// How far gains are from each requirement. Slack is relative and positive when met: value/limit - 1 for
/// margins, limit/value - 1 for peaks and noise, log ratios for crossovers; at most 1. All checks of a place
/// read -1 - min|1+L| where its loop is not stable.
struct GainEvaluation {
  Eigen::VectorXd nominal;     ///< per check
  Eigen::MatrixXd drawn;       ///< draws × checks
  Eigen::VectorXd over_draws;  ///< per check: the value that the required share of draws reaches or exceeds
  Eigen::VectorXd worst_of_draw;  ///< each draw's smallest slack
  double joint = 0.0;             ///< the value of it that the required share of draws reaches or exceeds
  [[nodiscard]] double worst() const { return std::min(nominal.minCoeff(), joint); }
};

/// Peak allowed from the angle (or heading) set point to the angle: 1.3, that is 2.3 dB or about 20 %
/// overshoot. Common practice.
inline constexpr double kAngleResonance = 1.3;

/// Least ratio of the rate loop's crossover to the angle loop's. Common practice for cascades; it also keeps
/// the noise of the attitude estimate, which is not identified, from reaching the demand through a very high
/// angle gain.
inline constexpr double kSeparation = 3.0;

/// Least ratio of the rate loop's crossover to the corner of its integral part. Common practice; a faster
/// integral buys stiffness the motors cannot deliver in a gust: it winds up against the demand limit.
inline constexpr double kIntegralSeparation = 4.0;

/// Tuning of the rate loop and, when flown, the angle loop around it, the outer loops as they are.
class GainProblem {
 public:
  /// `present`: flown gains inside out. `close_outer`: the loops outside the tuned ones are closed when the
  /// demand is looked at.
  GainProblem(const CascadeSetup& setup, const DrawnModels& models, std::vector<LoopGains> present,
              bool close_outer, double band_low_hz, double band_high_hz, double output_noise_psd,
              const GainRequirements& requirements);

  [[nodiscard]] std::size_t tuned() const { return tuned_; }  ///< 1 or 2 loops
  [[nodiscard]] const std::vector<Check>& checks() const { return checks_; }

  /// On the nominal model and all draws, of which the required share must meet.
  [[nodiscard]] GainEvaluation evaluate(const std::vector<LoopGains>& tuned) const;
  /// On the nominal model and some draws (counted from 0), all of which must meet. None: the nominal model
  /// alone.
  [[nodiscard]] GainEvaluation evaluate_on(const std::vector<LoopGains>& tuned,
                                           const std::vector<std::size_t>& draws) const;

  [[nodiscard]] std::size_t draws() const { return models_.plants.size() - 1; }
  [[nodiscard]] double share_of_draws() const { return requirements_.share_of_draws; }

  /// "phase margin of roll_rate 45.2° (at least 45°)" for a slack of one check.
  [[nodiscard]] std::string words(const Check& check, double slack) const;

  /// F P of the nominal model: what the rate controller sees.
  [[nodiscard]] Eigen::VectorXcd rate_plant() const { return filtered_rate_.front(); }
  [[nodiscard]] const Eigen::VectorXd& frequency_hz() const { return models_.frequency_hz; }

 private:
  [[nodiscard]] GainEvaluation evaluate_share(const std::vector<LoopGains>& tuned,
                                              const std::vector<std::size_t>& draws, double share) const;
  struct Controllers;
  struct OpenLoops;
  struct Stability;
  [[nodiscard]] Controllers controllers(const std::vector<LoopGains>& tuned) const;
  [[nodiscard]] OpenLoops open_loops(std::size_t model, const Controllers& c) const;
  [[nodiscard]] Stability nominal_stability(const OpenLoops& loops,
                                            const std::vector<LoopGains>& tuned) const;
  [[nodiscard]] bool stable_by_poles(std::size_t model, std::size_t place,
                                     const std::vector<LoopGains>& tuned) const;
  [[nodiscard]] Eigen::VectorXd slacks(OpenLoops& loops, const std::vector<bool>& stable) const;
  [[nodiscard]] double slack(const Check& check, const Margins& margins, const OpenLoops& loops,
                             std::size_t place) const;

  CascadeSetup setup_;
  const DrawnModels& models_;
  std::vector<LoopGains> present_;
  std::size_t tuned_, closed_;
  double band_low_hz_, band_high_hz_, output_noise_psd_;
  GainRequirements requirements_;
  std::vector<Place> places_;
  std::vector<Check> checks_;
  Eigen::Index band_edge_;        ///< grid index of band_high_hz, the last one if it is beyond the grid
  Eigen::VectorXd bin_width_hz_;  ///< trapezoid weights of the noise integral
  std::vector<Eigen::VectorXcd> filtered_rate_;  ///< F P_0
  std::vector<Eigen::VectorXcd>
      outer_;  ///< what the outer loops add behind E_1: P_2 (E_2 + D_2) + E_2 P_3 (E_3 + D_3)
};

}  // namespace hoverwright::ident
