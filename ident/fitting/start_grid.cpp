// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/fitting/start_grid.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>

#include "ident/fitting/pair_errors.h"

namespace hoverwright::ident {
namespace {

std::vector<double> geometric(double first, double last, int count) {
  std::vector<double> list;
  for (int i = 0; i < count; ++i)
    list.push_back(first * std::pow(last / first, static_cast<double>(i) / (count - 1)));
  return list;
}

/// Parameters of the structure with gain one and no delay, at every grid point of poles and zero.
std::vector<Eigen::VectorXd> shapes(const Structure& structure, double low_hz, double high_hz) {
  constexpr double kTwoPi = 2.0 * std::numbers::pi;
  const bool lagged = structure.has_parameter("motor_lag"), led = structure.has_parameter("reaction_lead");
  const double middle_hz = std::sqrt(low_hz * high_hz);
  const std::vector<double> slow_hz = geometric(0.25 * low_hz, lagged ? middle_hz : high_hz, lagged ? 4 : 6);
  const std::vector<double> fast_hz = lagged ? geometric(low_hz, 1.5 * high_hz, 6) : std::vector<double>{0.0};
  const std::vector<double> zero_hz = led ? geometric(0.5 * low_hz, high_hz, 4) : std::vector<double>{0.0};
  std::vector<Eigen::VectorXd> list;
  for (double slow : slow_hz)
    for (double fast : fast_hz)
      for (double zero : zero_hz) {
        if (lagged && fast < 1.2 * slow) continue;
        Eigen::VectorXd shape =
            Eigen::VectorXd::Zero(static_cast<Eigen::Index>(structure.parameters().size()));
        shape[structure.index_of("effectiveness")] = 1.0;
        shape[structure.index_of("damping")] = kTwoPi * slow;
        if (lagged) shape[structure.index_of("motor_lag")] = 1.0 / (kTwoPi * fast);
        if (led) shape[structure.index_of("reaction_lead")] = 1.0 / (kTwoPi * zero);
        list.push_back(shape);
      }
  return list;
}

}  // namespace

Eigen::VectorXd start_weights(const FrequencyResponse& points) {
  Eigen::VectorXd weights(points.points());
  for (Eigen::Index k = 0; k < weights.size(); ++k) {
    const PairNoise& noise = points.noise[static_cast<std::size_t>(k)];
    const double demand = std::norm(points.b[k]), output = std::norm(points.a[k]);
    weights[k] = demand > 0.0 ? demand / (demand * noise.aa + output * noise.bb) : 0.0;
  }
  return weights;
}

std::vector<FitStart> start_grid(const FrequencyResponse& points, const Structure& structure,
                                 std::size_t count) {
  const double low_hz = points.frequency_hz.minCoeff(), high_hz = points.frequency_hz.maxCoeff();
  const Eigen::VectorXd weights = start_weights(points);
  const Eigen::Index gain = structure.index_of("effectiveness"), delay = structure.index_of("delay");

  // Delays from a tenth of a turn to two turns at the top of the band.
  std::vector<FitStart> starts;
  std::vector<Eigen::VectorXcd> turns;
  const std::vector<double> delays = {0.03 / high_hz, 0.1 / high_hz, 0.25 / high_hz,
                                      0.5 / high_hz,  1.0 / high_hz, 2.0 / high_hz};
  for (double delay_s : delays) {
    Eigen::VectorXcd turn(points.points());
    for (Eigen::Index k = 0; k < turn.size(); ++k)
      turn[k] = std::polar(1.0, -2.0 * std::numbers::pi * points.frequency_hz[k] * delay_s);
    turns.push_back(turn);
  }
  for (Eigen::VectorXd shape : shapes(structure, low_hz, high_hz)) {
    const Eigen::VectorXcd without_delay = structure.continuous_response(shape, points.frequency_hz);
    for (std::size_t i = 0; i < delays.size(); ++i) {
      const Eigen::VectorXcd unit = without_delay.cwiseProduct(turns[i]);
      const Eigen::VectorXcd model = unit.cwiseProduct(points.b);
      // Weighted least squares for the one real gain.
      const double aligned =
          (weights.array() * (model.conjugate().cwiseProduct(points.a)).real().array()).sum();
      const double power = (weights.array() * model.array().abs2()).sum();
      if (!(power > 0.0) || aligned == 0.0) continue;
      const auto cost = pair_cost(points, unit * (aligned / power));
      if (!cost) continue;
      shape[gain] = aligned / power;
      shape[delay] = delays[i];
      starts.push_back({shape, *cost});
    }
  }
  std::stable_sort(starts.begin(), starts.end(),
                   [](const FitStart& x, const FitStart& y) { return x.cost < y.cost; });
  if (starts.size() > count) starts.resize(count);
  return starts;
}

}  // namespace hoverwright::ident
