// SPDX-License-Identifier: GPL-3.0-or-later
#include <algorithm>
#include <boost/math/distributions/fisher_f.hpp>
#include <vector>

#include "ident/spectra/frequency_response.h"

namespace hoverwright::ident {
namespace {

constexpr Eigen::Index kGroup = 6;    // lines judged together
constexpr double kFalseAlarm = 0.01;  // over the whole response
constexpr double kNegligible = 0.01;  // median relative difference nobody needs to be warned of

/// Mean scaled squared difference of one group of lines over its limit.
double group_excess(const FrequencyResponse& response, const Eigen::VectorXd& scaled, Eigen::Index first,
                    Eigen::Index count) {
  // What correlated lines are worth: count² / Σ |correlation|².
  double shared = static_cast<double>(count);
  for (Eigen::Index d = 1; d <= 2; ++d) {
    const Eigen::VectorXcd& correlation = response.neighbour_correlation[static_cast<std::size_t>(d - 1)];
    if (count > d) shared += 2.0 * correlation.segment(first, count - d).squaredNorm();
  }
  const double lines = static_cast<double>(count * count) / shared;
  const double groups = std::max(1.0, static_cast<double>(response.points()) / static_cast<double>(count));
  const double noise_dof = response.degrees_of_freedom.segment(first, count).minCoeff();
  const boost::math::fisher_f distribution(2.0 * lines, 2.0 * noise_dof);
  const double limit = boost::math::quantile(boost::math::complement(distribution, kFalseAlarm / groups));
  return scaled.segment(first, count).mean() / limit;
}

/// |a - D b|² over its variance, D the direct estimate: the test stays exact where b is known poorly and a/b
/// is not normal. The direct estimate's own variance is added as if independent, which only makes the warning
/// rarer.
Eigen::VectorXd scaled_differences(const FrequencyResponse& response) {
  Eigen::VectorXd scaled = Eigen::VectorXd::Zero(response.points());
  for (Eigen::Index k = 0; k < response.points(); ++k) {
    const std::complex<double> direct = response.direct[k];
    const double variance = response.noise[static_cast<std::size_t>(k)].variance_of_error(direct) +
                            std::norm(response.b[k]) * response.direct_variance[k];
    if (variance > 0.0) scaled[k] = std::norm(response.a[k] - direct * response.b[k]) / variance;
  }
  return scaled;
}

/// Points first..last of the run of flagged groups with the largest excess.
struct FlaggedRun {
  double excess = 0.0;
  Eigen::Index first = 0, last = 0;
};

FlaggedRun largest_run(const FrequencyResponse& response) {
  const Eigen::VectorXd scaled = scaled_differences(response);
  const Eigen::Index count = std::min(kGroup, response.points());
  FlaggedRun best, current;
  for (Eigen::Index k = 0; k + count <= response.points(); ++k) {
    const double excess = group_excess(response, scaled, k, count);
    if (excess <= 1.0) {
      current.excess = 0.0;
      continue;
    }
    if (current.excess == 0.0) current.first = k;
    current.excess += excess - 1.0;
    current.last = k + count - 1;
    if (current.excess > best.excess) best = current;
  }
  return best;
}

double median(std::vector<double> values) {
  const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  return *middle;
}

}  // namespace

FeedbackBias find_feedback_bias(const FrequencyResponse& response) {
  FeedbackBias bias;
  if (!response.reference_based || response.points() == 0) return bias;
  const FlaggedRun run = largest_run(response);
  if (!(run.excess > 0.0)) return bias;
  std::vector<double> differences;
  for (Eigen::Index k = run.first; k <= run.last; ++k) {
    const std::complex<double> reference = response.a[k] / response.b[k];
    differences.push_back(std::abs(response.direct[k] - reference) / std::abs(reference));
  }
  const double difference = median(differences);
  if (difference < kNegligible) return bias;
  return {true, response.frequency_hz[run.first], response.frequency_hz[run.last], difference};
}

}  // namespace hoverwright::ident
