// SPDX-License-Identifier: GPL-3.0-or-later
// Monte-Carlo of the estimator on the roll axis of roll_loop.h: two records of 45 s, 0.3-20 Hz, amplitude
// 0.1.
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdio>
#include <random>
#include <string>
#include <vector>

#include "ident/spectra/error_region.h"
#include "roll_loop.h"

namespace {

using namespace hoverwright::ident;
using hoverwright::tests::RollLoop;
using Complex = std::complex<double>;

std::vector<FrequencyResponse> fly_many(const RollLoop& loop, const RollLoop::Disturbance& disturbance,
                                        int runs, std::uint64_t seed) {
  const Eigen::VectorXd r = hoverwright::tests::quiet_chirp(0.3, 20.0, 45.0, 0.1, RollLoop::kRateHz);
  OverlappedWindowsOptions options;
  options.sample_rate_hz = RollLoop::kRateHz;
  std::mt19937_64 random(seed);
  std::vector<FrequencyResponse> flights;
  for (int run = 0; run < runs; ++run) {
    std::vector<RecordSignals> records;
    for (int k = 0; k < 2; ++k) records.push_back(loop.fly(r, disturbance, random));
    flights.push_back(estimate_overlapped_windows(records, options));
  }
  return flights;
}

/// Figures of one octave over all flights. Errors are those of a - H b: with b known poorly the ratio a/b has
/// no mean.
struct Octave {
  double low_hz = 0.0, high_hz = 0.0;
  double lines = 0.0;                           ///< in the octave
  double bias = 0.0;                            ///< rms over lines of |mean(a - H b)| / |mean(b) H|
  double bias_by_chance = 0.0;                  ///< the same, expected from the runs' scatter alone
  double direct_bias = 0.0;                     ///< mean over lines of |mean(direct) - H| / |H|
  double coverage = 0.0, coverage_error = 0.0;  ///< and its standard error over the runs
  double variance_ratio = 0.0;                  ///< predicted over sampled
  double correlation_error = 0.0;  ///< rms of predicted minus sampled neighbour correlation, d = 1 and 2
  double correlation = 0.0;        ///< rms predicted at d = 1
};

struct LineFigures {
  Complex mean{}, mean_b{}, mean_direct{};
  double power = 0.0, predicted = 0.0;
};

Complex error_at(const FrequencyResponse& flight, Eigen::Index k) {
  return flight.a[k] - RollLoop::truth(flight.frequency_hz[k]) * flight.b[k];
}

LineFigures line_figures(const std::vector<FrequencyResponse>& flights, Eigen::Index k) {
  const Complex truth = RollLoop::truth(flights.front().frequency_hz[k]);
  const double share = 1.0 / static_cast<double>(flights.size());
  LineFigures figures;
  for (const FrequencyResponse& flight : flights) {
    figures.mean += share * error_at(flight, k);
    figures.mean_b += share * flight.b[k];
    figures.mean_direct += share * flight.direct[k];
    figures.power += share * std::norm(error_at(flight, k));
    figures.predicted += share * flight.noise[static_cast<std::size_t>(k)].variance_of_error(truth);
  }
  return figures;
}

/// |predicted - sampled|² of the correlation between lines k and k + d.
double correlation_miss(const std::vector<FrequencyResponse>& flights, Eigen::Index k, Eigen::Index d) {
  Complex cross{};
  double here = 0.0, there = 0.0;
  for (const FrequencyResponse& flight : flights) {
    cross += error_at(flight, k) * std::conj(error_at(flight, k + d));
    here += std::norm(error_at(flight, k));
    there += std::norm(error_at(flight, k + d));
  }
  const Complex predicted = flights.front().neighbour_correlation[static_cast<std::size_t>(d - 1)][k];
  return std::norm(predicted - cross / std::sqrt(here * there));
}

/// Share of the octave's lines whose region holds the truth, per flight.
double held(const FrequencyResponse& flight, Eigen::Index first, Eigen::Index last) {
  double count = 0.0;
  for (Eigen::Index k = first; k <= last; ++k) {
    count += in_fieller_region(RollLoop::truth(flight.frequency_hz[k]), flight.a[k], flight.b[k],
                               flight.noise[static_cast<std::size_t>(k)], flight.degrees_of_freedom[k], 0.95)
                 ? 1.0
                 : 0.0;
  }
  return count / static_cast<double>(last - first + 1);
}

Octave judge(const std::vector<FrequencyResponse>& flights, double low_hz, double high_hz) {
  const FrequencyResponse& any = flights.front();
  const double runs = static_cast<double>(flights.size());
  Octave octave{low_hz, high_hz};
  Eigen::Index first = any.points(), last = 0;
  for (Eigen::Index k = 0; k < any.points(); ++k) {
    if (any.frequency_hz[k] < low_hz || any.frequency_hz[k] >= high_hz) continue;
    first = std::min(first, k);
    last = k;
  }
  REQUIRE(last >= first);
  const double lines = static_cast<double>(last - first + 1);
  octave.lines = lines;
  for (Eigen::Index k = first; k <= last; ++k) {
    const LineFigures figures = line_figures(flights, k);
    const Complex truth = RollLoop::truth(any.frequency_hz[k]);
    const double scale = std::norm(figures.mean_b * truth);
    octave.bias += std::norm(figures.mean) / scale / lines;
    octave.bias_by_chance += (figures.power - std::norm(figures.mean)) / runs / scale / lines;
    octave.direct_bias += std::abs(figures.mean_direct / truth - 1.0) / lines;
    octave.variance_ratio += figures.predicted / figures.power / lines;
    octave.correlation_error +=
        (correlation_miss(flights, k, 1) + correlation_miss(flights, k, 2)) / (2.0 * lines);
    octave.correlation += std::norm(any.neighbour_correlation[0][k]) / lines;
  }
  for (double* value :
       {&octave.bias, &octave.bias_by_chance, &octave.correlation_error, &octave.correlation}) {
    *value = std::sqrt(*value);
  }
  double square = 0.0;
  for (const FrequencyResponse& flight : flights) {
    const double share = held(flight, first, last);
    octave.coverage += share / runs;
    square += share * share / runs;
  }
  octave.coverage_error = std::sqrt(std::max(0.0, square - octave.coverage * octave.coverage) / (runs - 1.0));
  return octave;
}

std::vector<Octave> judge_octaves(const std::string& name, const std::vector<FrequencyResponse>& flights) {
  std::vector<Octave> octaves;
  std::string table =
      name + ", " + std::to_string(flights.size()) + " runs, " + flights.front().settings +
      "\n  Hz          bias %  by chance %  direct bias %  95 % regions hold   predicted/true variance  "
      "neighbour correlation, its error\n";
  for (const double low_hz : {0.5, 1.0, 2.0, 4.0, 8.0}) {
    const Octave octave = judge(flights, low_hz, 2.0 * low_hz);
    char line[200];
    std::snprintf(line, sizeof line,
                  "  %4.1f-%4.1f   %7.2f %10.2f %13.1f      %6.2f +- %4.2f %18.3f %20.3f %12.3f\n",
                  octave.low_hz, octave.high_hz, 100.0 * octave.bias, 100.0 * octave.bias_by_chance,
                  100.0 * octave.direct_bias, 100.0 * octave.coverage, 100.0 * octave.coverage_error,
                  octave.variance_ratio, octave.correlation, octave.correlation_error);
    table += line;
    octaves.push_back(octave);
  }
  WARN(table);
  return octaves;
}

int bias_warnings(const std::vector<FrequencyResponse>& flights) {
  int count = 0;
  for (const FrequencyResponse& flight : flights) count += find_feedback_bias(flight).present ? 1 : 0;
  return count;
}

// What the windows' resolution may leave of the response's slope and bend, relative; measured 0.8 % at 0.5-1
// Hz, 0.3 % at 1-2 Hz.
constexpr double kResolutionBias = 0.01;

TEST_CASE("closed loop in gusts: unbiased where the direct estimate is not, calibrated, warned of",
          "[study]") {
  // Gusts with 40 % of the excited rate's rms, gyro 0.01 rad/s. 200 runs, seed 101.
  const RollLoop loop;
  const double gust = hoverwright::tests::gust_for_ratio(
      loop, hoverwright::tests::quiet_chirp(0.3, 20.0, 45.0, 0.1, RollLoop::kRateHz), 0.4);
  const std::vector<FrequencyResponse> flights = fly_many(loop, {gust, 0.01}, 200, 101);
  const std::vector<Octave> octaves = judge_octaves("gusts 40 %", flights);
  for (const Octave& octave : octaves) {
    INFO(octave.low_hz << " Hz up");
    // The squared mean error of n lines, worth n/1.6 independent complex ones, scatters by sqrt(1.6/n) about
    // what chance brings.
    const double chance = octave.bias_by_chance * std::sqrt(1.0 + 3.0 * std::sqrt(1.6 / octave.lines));
    CHECK(octave.bias < std::hypot(chance, kResolutionBias));
    // Coverage: three standard errors over the runs (lines within a run depend on each other, runs do not),
    // and 1 % for treating pooled, correlated residuals as so many independent ones.
    CHECK(std::abs(octave.coverage - 0.95) < 3.0 * octave.coverage_error + 0.01);
    CHECK(octave.variance_ratio > 0.85);
    CHECK(octave.variance_ratio < 1.2);
    // A correlation sampled from n runs scatters by (1 - |ρ|²)/sqrt(n) < 1/sqrt(n) = 0.071; rms over 10
    // values or more.
    CHECK(octave.correlation_error < 1.3 / std::sqrt(200.0));
    CHECK(octave.correlation > 0.3);  // it matters
  }
  CHECK(octaves[0].direct_bias > 0.2);
  CHECK(octaves[0].direct_bias > 10.0 * octaves[0].bias);
  // The warning: at least 95 % of the flights.
  const int warned = bias_warnings(flights);
  const FeedbackBias bias = find_feedback_bias(flights.front());
  WARN("gusts 40 %: feedback bias found in " << warned << " of 200 flights; first: " << bias.low_hz << "-"
                                             << bias.high_hz << " Hz, median difference "
                                             << bias.median_difference);
  CHECK(warned >= 190);
  CHECK(bias.low_hz < 0.6);
  CHECK(bias.high_hz < 4.0);
}

TEST_CASE("closed loop in calm air: regions hold the truth, no feedback warning", "[study]") {
  // Gyro noise only: below 4 Hz the windows' resolution decides, and the allowance for it makes the regions
  // hold more often than they say; above, they are as calibrated as in gusts. 120 runs, seed 102.
  const std::vector<FrequencyResponse> flights = fly_many(RollLoop(), {0.0, 0.01}, 120, 102);
  for (const Octave& octave : judge_octaves("calm", flights)) {
    INFO(octave.low_hz << " Hz up");
    CHECK(octave.bias < kResolutionBias);
    CHECK(octave.coverage > 0.95 - 3.0 * octave.coverage_error - 0.01);
    if (octave.low_hz >= 4.0) {
      CHECK(octave.coverage < 0.95 + 3.0 * octave.coverage_error + 0.01);
      CHECK(octave.variance_ratio < 1.2);
    }
    CHECK(octave.variance_ratio > 0.85);
    CHECK(octave.variance_ratio < 3.0);  // an allowance, not a blanket: under twice the standard deviation
  }
  // 99 % over the whole response: 1.2 false warnings expected at most of 120; more than five have a
  // probability of 0.2 % (binomial).
  const int warned = bias_warnings(flights);
  WARN("calm: feedback bias found in " << warned << " of 120 flights");
  CHECK(warned <= 5);
}

TEST_CASE("open loop in gusts: regions calibrated, no feedback warning", "[study]") {
  // 120 runs, seed 103; gusts with 40 % of the excited rate's rms.
  const RollLoop loop(false);
  const double gust = hoverwright::tests::gust_for_ratio(
      loop, hoverwright::tests::quiet_chirp(0.3, 20.0, 45.0, 0.1, RollLoop::kRateHz), 0.4);
  const std::vector<FrequencyResponse> flights = fly_many(loop, {gust, 0.01}, 120, 103);
  for (const Octave& octave : judge_octaves("open loop, gusts 40 %", flights)) {
    INFO(octave.low_hz << " Hz up");
    CHECK(std::abs(octave.coverage - 0.95) < 3.0 * octave.coverage_error + 0.01);
    CHECK(octave.variance_ratio > 0.85);
    CHECK(octave.variance_ratio < 1.2);
  }
  const int warned = bias_warnings(flights);
  WARN("open loop: feedback bias found in " << warned << " of 120 flights");
  CHECK(warned <= 5);
}

TEST_CASE("direct estimate alone in closed loop: off by more than a fifth, and its noise does not tell",
          "[study]") {
  const RollLoop loop;
  const Eigen::VectorXd r = hoverwright::tests::quiet_chirp(0.3, 20.0, 45.0, 0.1, RollLoop::kRateHz);
  const double gust = hoverwright::tests::gust_for_ratio(loop, r, 0.4);
  std::mt19937_64 random(104);
  RecordSignals record = loop.fly(r, {gust, 0.01}, random);
  record.excitation.resize(0);
  OverlappedWindowsOptions options;
  options.sample_rate_hz = RollLoop::kRateHz;
  options.low_hz = 0.3;
  options.high_hz = 20.0;
  const FrequencyResponse response = estimate_overlapped_windows({record}, options);
  double worst = 0.0;
  for (Eigen::Index k = 0; k < response.points(); ++k) {
    const double f = response.frequency_hz[k];
    if (f < 0.5 || f > 1.0) continue;
    const Complex truth = RollLoop::truth(f);
    worst = std::max(worst, std::abs(response.direct[k] - truth) / std::abs(truth));
  }
  CHECK(worst > 0.2);
  CHECK(response.coherence_uy.maxCoeff() > 0.9);
}

}  // namespace
