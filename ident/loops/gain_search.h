// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "ident/loops/gain_problem.h"

namespace hoverwright::ident {

/// Gains of the tuned loops (rate, then angle if flown), and how they were judged.
struct FoundGains {
  std::vector<LoopGains> gains;
  GainEvaluation evaluation;  ///< on all draws
  double objective = 0.0;
  bool meets = false;
  bool nominal_can_meet = false;     ///< some gains meet the requirements on the nominal model alone
  std::vector<std::string> binding;  ///< per tuned loop: the requirement that stops a further increase
};

/// What the search makes large. Rate loop alone: its integral gain, the disturbance rejection of Åström &
/// Hägglund (Advanced PID Control): 1/ki is the integrated error after a step of disturbance. With the angle
/// loop around it: ki · kp_angle², the inverse product of the integrated angle error after a step of torque,
/// 1/(ki kp_angle), and that after a step of set point, 1/kp_angle. Either alone would end at a loop nobody
/// wants: the rate loop by itself takes all the phase at the demand and leaves no room for the angle loop.
/// Returned as the logarithm of the geometric mean gain.
double gain_objective(const std::vector<LoopGains>& tuned);

/// Best gains without (`use_derivative` false: the rate loop's kd = 0) or with the derivative. `start` are
/// the flown gains of the tuned loops. COBYLA (Powell 1994, from memory) in log gains from several starts on
/// some of the draws, then on all of them, then an increase of each objective gain to its border.
/// Deterministic.
FoundGains search_gains(const GainProblem& problem, const std::vector<LoopGains>& start, bool use_derivative,
                        double derivative_cutoff_hz, double phase_margin_deg);

}  // namespace hoverwright::ident
