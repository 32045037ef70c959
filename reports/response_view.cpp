// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/response_view.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>

#include "ident/spectra/error_region.h"

namespace hoverwright::reports {
namespace {

using Eigen::Index;

constexpr double kDegPerRad = 180.0 / std::numbers::pi;
constexpr double kConfidence = 0.95;
constexpr Index kMedianHalfWidth = 4;  // nine points: one wild line does not cut a band in two
constexpr Index kShortestBand = 3;     // points

bool finite(const std::complex<double>& value) {
  return std::isfinite(value.real()) && std::isfinite(value.imag());
}

double decibels(double gain) {
  return 20.0 * std::log10(gain);
}

PointLimits limits_of(const ident::FrequencyResponse& response, Index k) {
  PointLimits limits;
  const ident::PairNoise& noise = response.noise[static_cast<std::size_t>(k)];
  const bool usable = finite(response.a(k)) && finite(response.b(k)) && std::isfinite(noise.aa) &&
                      std::isfinite(noise.bb) && finite(noise.ab) && response.degrees_of_freedom(k) > 0.0;
  if (!usable) return limits;
  const ident::ErrorRegion region =
      ident::fieller_region(response.a(k), response.b(k), noise, response.degrees_of_freedom(k), kConfidence);
  limits.bounded = region.bounded;
  if (!region.bounded) return limits;
  if (region.gain_low > 0.0) limits.gain_low_db = decibels(region.gain_low);
  limits.gain_high_db = decibels(region.gain_high);
  if (region.phase_half_width_rad) limits.phase_half_width_deg = *region.phase_half_width_rad * kDegPerRad;
  return limits;
}

Eigen::VectorXd unwrapped_phase_deg(const Eigen::VectorXcd& response,
                                    const std::vector<PointLimits>& limits) {
  const Index points = response.size();
  Eigen::VectorXd phase(points);
  for (Index k = 0; k < points; ++k) phase(k) = std::arg(response(k)) * kDegPerRad;
  const auto trusted =
      std::find_if(limits.begin(), limits.end(), [](const PointLimits& point) { return point.trusted(); });
  // With no trusted point there is nothing better to start from than the lowest point.
  const Index start = trusted == limits.end() ? 0 : static_cast<Index>(trusted - limits.begin());
  const bool all = trusted == limits.end();
  if (points == 0) return phase;
  double reference = phase(start);
  for (Index k = 0; k < start; ++k) phase(k) = nearest_branch_deg(phase(k), reference);
  for (Index k = start; k < points; ++k) {
    if (!std::isfinite(phase(k))) continue;
    phase(k) = nearest_branch_deg(phase(k), reference);
    if (all || limits[static_cast<std::size_t>(k)].trusted()) reference = phase(k);
  }
  return phase;
}

/// Longest run of points for which `inside` holds.
template <typename Predicate>
std::optional<FrequencyBand> longest_run(const Eigen::VectorXd& frequency_hz, Predicate inside) {
  Index best_first = 0;
  Index best_length = 0;
  Index first = 0;
  for (Index k = 0; k < frequency_hz.size(); ++k) {
    if (!inside(k)) {
      first = k + 1;
    } else if (k - first + 1 > best_length) {
      best_first = first;
      best_length = k - first + 1;
    }
  }
  if (best_length < kShortestBand) return std::nullopt;
  return FrequencyBand{frequency_hz(best_first), frequency_hz(best_first + best_length - 1)};
}

/// Median over the neighbours of each point (fewer at the ends).
Eigen::VectorXd running_median(const Eigen::VectorXd& values) {
  Eigen::VectorXd result(values.size());
  for (Index k = 0; k < values.size(); ++k) {
    const Index first = std::max<Index>(0, k - kMedianHalfWidth);
    const Index last = std::min<Index>(values.size() - 1, k + kMedianHalfWidth);
    Eigen::VectorXd window = values.segment(first, last - first + 1);
    const auto middle = window.data() + window.size() / 2;
    std::nth_element(window.data(), middle, window.data() + window.size());
    result(k) = *middle;
  }
  return result;
}

}  // namespace

double nearest_branch_deg(double phase_deg, double reference_deg) {
  return reference_deg + std::remainder(phase_deg - reference_deg, 360.0);
}

ResponseView view_response(const ident::FrequencyResponse& response) {
  ResponseView view;
  const Index points = response.points();
  view.response = response.response();
  view.variance = response.variance();
  view.limits.reserve(static_cast<std::size_t>(points));
  for (Index k = 0; k < points; ++k) view.limits.push_back(limits_of(response, k));
  const Eigen::ArrayXd gain = view.response.cwiseAbs().array();
  const Eigen::ArrayXd relative_std = (view.variance.array() / 2.0).sqrt() / gain;
  view.gain_db = 20.0 * gain.log10();
  view.gain_std_db = 20.0 / std::numbers::ln10 * relative_std;
  view.phase_std_deg = kDegPerRad * relative_std;
  view.phase_deg = unwrapped_phase_deg(view.response, view.limits);
  if (response.direct.size() == points) {
    view.direct_gain_db = 20.0 * response.direct.cwiseAbs().array().log10();
    view.direct_phase_deg.resize(points);
    for (Index k = 0; k < points; ++k) {
      view.direct_phase_deg(k) =
          nearest_branch_deg(std::arg(response.direct(k)) * kDegPerRad, view.phase_deg(k));
    }
  }
  return view;
}

std::optional<double> gain_half_width_db(const ResponseView& view, Index point) {
  const PointLimits& limits = view.limits[static_cast<std::size_t>(point)];
  if (!limits.gain_low_db || !limits.gain_high_db) return std::nullopt;
  return std::max(*limits.gain_high_db - view.gain_db(point), view.gain_db(point) - *limits.gain_low_db);
}

std::optional<FrequencyBand> band_known_within(const ResponseView& view, const Eigen::VectorXd& frequency_hz,
                                               double half_width_db) {
  Eigen::VectorXd widths(frequency_hz.size());
  for (Index k = 0; k < widths.size(); ++k) {
    const std::optional<double> width = gain_half_width_db(view, k);
    widths(k) = width && std::isfinite(*width) ? *width : std::numeric_limits<double>::max();
  }
  const Eigen::VectorXd median = running_median(widths);
  return longest_run(frequency_hz, [&](Index k) { return median(k) <= half_width_db; });
}

std::optional<FrequencyBand> band_above(const Eigen::VectorXd& values, const Eigen::VectorXd& frequency_hz,
                                        double level) {
  if (values.size() != frequency_hz.size()) return std::nullopt;
  Eigen::VectorXd known = values;
  for (double& value : known) {
    if (!std::isfinite(value)) value = std::numeric_limits<double>::lowest();
  }
  const Eigen::VectorXd median = running_median(known);
  return longest_run(frequency_hz, [&](Index k) { return median(k) >= level; });
}

}  // namespace hoverwright::reports
