// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <vector>

#include "ident/fitting/model_fit.h"
#include "ident/loops/cascade_model.h"
#include "ident/loops/recommend.h"

namespace hoverwright::ident {

/// The axis as identified: the nominal model first, then joint draws from its uncertainty, each with its
/// response on one grid.
struct DrawnModels {
  Eigen::VectorXd frequency_hz;
  Eigen::VectorXcd gyro_filter;
  std::vector<SampledStateSpace> plants;
  std::vector<Eigen::MatrixXcd> responses;  ///< points × levels
  std::vector<double> effectiveness;        ///< K
  std::vector<bool> open_loop_stable;       ///< the damping is positive
  int left_out = 0;                         ///< draws no held demand can have (delay below half a sample)
};

/// Grid for margins: 0.005 Hz (a tenth of the slowest position loop in common use) to just below half the
/// sample rate, about 400 points, `band_high_hz` among them.
Eigen::VectorXd margin_grid(double sample_rate_hz, double band_high_hz);

/// @throws Failure (unsupported) when the nominal model cannot be flown or fewer than half of the draws can.
DrawnModels draw_models(const CascadeSetup& setup, const ModelFit& fit, int draws, std::uint64_t seed);

/// analyse_cascade for every model, nominal first; parallel, the result independent of the number of threads.
std::vector<CascadeAnalysis> analyse_models(const CascadeSetup& setup, const DrawnModels& models,
                                            const std::vector<LoopGains>& gains);

/// Stable, with gain margin (both ways), phase margin and sensitivity peak as required. A margin without a
/// crossing is met.
bool meets(const Margins& margins, const GainRequirements& requirements);

/// Ranges of one loop over the models, nominal first.
MarginRanges margin_ranges(const std::vector<Margins>& margins, const GainRequirements& requirements);

}  // namespace hoverwright::ident
