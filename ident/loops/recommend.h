// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "ident/fitting/model_fit.h"
#include "ident/loops/cascade.h"

namespace hoverwright::ident {

/// Requirements of a recommendation. Defaults: 6 dB and 45° after SAE AS94900 / MIL-DTL-9490E (from memory),
/// sensitivity peak 2 after Åström & Hägglund, Advanced PID Control.
struct GainRequirements {
  double gain_margin_db = 6.0;
  double phase_margin_deg = 45.0;
  double sensitivity_peak = 2.0;
  double share_of_draws = 0.95;  ///< share of the model's joint draws that must meet them
  int draws = 200;
  std::uint64_t seed = 1;
  double demand_noise_rms = 0.02;  ///< demand caused by output noise, normalised, at the demand
};

/// A value over the model's uncertainty: nominal and the 2.5 % and 97.5 % points over the draws.
struct Range {
  double nominal = 0.0, low = 0.0, high = 0.0;
};

/// Margins of one loop with their ranges; a margin is absent when the nominal model has no crossing in the
/// band.
struct MarginRanges {
  std::optional<Range> gain_margin_db, phase_margin_deg, sensitivity_peak, crossover_hz;
  double stable_share = 0.0;  ///< share of draws whose closed loop is stable
  double meets_share = 0.0;   ///< share of draws that meet all requirements
};

struct LoopRecommendation {
  Loop loop = Loop::roll_rate;
  LoopGains present;
  MarginRanges present_margins;
  std::optional<LoopGains> recommended;  ///< absent for loops this release does not tune
  std::optional<MarginRanges> recommended_margins;
  std::string binding;  ///< the requirement that stops further increase, in words
  std::string note;
};

struct AxisRecommendation {
  Axis axis = Axis::roll;
  std::vector<LoopRecommendation> loops;  ///< inside out
  MarginRanges present_at_demand;
  std::optional<MarginRanges> recommended_at_demand;
  std::vector<std::string> warnings;
};

/// Margins of the present gains of all loops of the axis and, for its rate and angle (or heading) loops,
/// recommended gains. Climb rate, altitude, velocity and position loops keep theirs; the last two are looked
/// at again around the new inner loops.
///
/// Rate and angle loop are tuned together, because the phase the angle loop needs at the demand is phase the
/// rate loop may not use up: highest ki · kp_angle², see gain_objective (rate loop alone: highest ki),
/// subject to the requirements at the error of the rate loop, at the error of the angle loop, and at the
/// demand with all flown loops closed. Each holds for the nominal model and the stated share of joint draws:
///   gain margin up and down, phase margin, sensitivity peak; peak from angle set point to angle at most 1.3;
///   rate crossover at least 3 times the angle's and 4 times the corner of the rate loop's integral part;
///   angle gain × angle limit at most effectiveness × rate limit (what can be braked); gain crossovers inside
///   the measured band; where the phase crosses -180° above the band, the gain margin is taken from the gain
///   at its edge instead, so nothing rests on an extrapolated phase; demand noise within budget.
/// kd stays zero unless it raises the objective (a mean gain) by 5 %. NLopt COBYLA (Powell 1994) in log
/// gains; gains have four digits. `output_noise_psd` one-sided (rad/s)²/Hz white level of the rate sensor; 0
/// when unknown (noise budget then not used).
/// @throws Failure (unsupported) without a converged fit; (bad_input) for impossible requirements or loops.
AxisRecommendation recommend_axis(const CascadeSetup& setup, const LoopGainSet& present, const ModelFit& fit,
                                  double output_noise_psd, const GainRequirements& requirements);

}  // namespace hoverwright::ident
