// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/signals/doublet.h"

#include "excitation/signals/checks.h"

namespace hoverwright::excitation {

void Doublet::check() const {
  require_positive(amplitude, "amplitude");
  require_positive(duration_s, "duration_s");
}

double Doublet::value(double t_s) const {
  constexpr double kEdgeSlack_s = 1e-9;
  const double t = t_s + kEdgeSlack_s;
  if (t < 0.0 || t >= duration_s) return 0.0;
  return t < 0.5 * duration_s ? amplitude : -amplitude;
}

}  // namespace hoverwright::excitation
