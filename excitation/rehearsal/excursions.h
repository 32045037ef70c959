// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>

#include "excitation/rehearsal/rehearsal.h"

namespace hoverwright::excitation {

/// The vehicle's true excursions, one row per logged sample: tilt (deg), largest body rate (deg/s),
/// horizontal distance from the hover point (m), height about the hover height (m).
struct TrueMotion {
  Eigen::VectorXd tilt_deg, rate_deg_s, drift_m, climb_m;
};

/// Peaks over the flight and per record, and a sentence for every limit exceeded.
Excursions find_excursions(const FlightLog& log, const TrueMotion& motion, const Schedule& schedule,
                           const ident::Limits& limits, bool diverged);

}  // namespace hoverwright::excitation
