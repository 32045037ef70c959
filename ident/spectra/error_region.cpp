// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/error_region.h"

#include <algorithm>
#include <boost/math/distributions/fisher_f.hpp>
#include <cmath>
#include <limits>

#include "ident/failure.h"

namespace hoverwright::ident {
namespace {

double f_quantile(double degrees_of_freedom, double confidence) {
  if (!(confidence > 0.0 && confidence < 1.0)) {
    throw Failure(FailureKind::bad_input, "a confidence lies between 0 and 1", "confidence", "Use 0.95.");
  }
  if (!(degrees_of_freedom > 0.0) || !std::isfinite(degrees_of_freedom)) {
    throw Failure(FailureKind::bad_input, "an error region needs noise with degrees of freedom",
                  "degrees_of_freedom", "");
  }
  return boost::math::quantile(boost::math::fisher_f(2.0, 2.0 * degrees_of_freedom), confidence);
}

}  // namespace

// With p = a b* - F C_ab, A = |b|² - F C_bb and s = |a|² - F C_aa the inequality reads A|H|² - 2 Re(H* p) + s
// <= 0: a disc about p/A for A > 0, else the outside of a disc, a half plane or all the plane.
ErrorRegion fieller_region(std::complex<double> a, std::complex<double> b, const PairNoise& noise,
                           double degrees_of_freedom, double confidence) {
  const double f = f_quantile(degrees_of_freedom, confidence);
  const double leading = std::norm(b) - f * noise.bb;
  ErrorRegion region;
  if (leading > 0.0) {
    // Centre and radius from the estimate outward, so that small regions do not suffer from cancellation:
    // centre - Ĥ = F (Ĥ C_bb - C_ab) / A, radius² = |centre - Ĥ|² + F σ²(Ĥ) / A.
    const std::complex<double> estimate = a / b;
    const std::complex<double> offset = f * (estimate * noise.bb - noise.ab) / leading;
    region.centre = estimate + offset;
    region.radius =
        std::sqrt(std::norm(offset) + f * std::max(0.0, noise.variance_of_error(estimate)) / leading);
    const double distance = std::abs(region.centre);
    region.gain_low = std::max(0.0, distance - region.radius);
    region.gain_high = distance + region.radius;
    if (distance > region.radius) {
      region.phase_half_width_rad =
          std::asin(region.radius / distance) + std::abs(std::arg(region.centre * std::conj(estimate)));
    }
    return region;
  }
  region.bounded = false;
  region.gain_high = std::numeric_limits<double>::infinity();
  const std::complex<double> p = a * std::conj(b) - f * noise.ab;
  const double s = std::norm(a) - f * noise.aa;
  if (s > 0.0) {  // the origin is excluded: distance from it to the edge of the region
    region.gain_low = s / (std::abs(p) + std::sqrt(std::norm(p) - leading * s));
  }
  return region;
}

bool in_fieller_region(std::complex<double> truth, std::complex<double> a, std::complex<double> b,
                       const PairNoise& noise, double degrees_of_freedom, double confidence) {
  const double f = f_quantile(degrees_of_freedom, confidence);
  return std::norm(a - truth * b) <= f * noise.variance_of_error(truth);
}

}  // namespace hoverwright::ident
