// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/overlapped_windows.h"

#include <array>
#include <catch2/catch.hpp>
#include <cmath>
#include <random>
#include <tuple>

#include "ident/failure.h"
#include "roll_loop.h"

namespace {

using namespace hoverwright::ident;
using hoverwright::tests::quiet_chirp;

OverlappedWindowsOptions at_rate(double rate_hz) {
  OverlappedWindowsOptions options;
  options.sample_rate_hz = rate_hz;
  return options;
}

Eigen::VectorXd delayed(const Eigen::VectorXd& x, Eigen::Index samples) {
  Eigen::VectorXd y = Eigen::VectorXd::Zero(x.size());
  y.tail(x.size() - samples) = x.head(x.size() - samples);
  return y;
}

Eigen::VectorXd white(Eigen::Index samples, std::mt19937_64& random) {
  std::normal_distribution<double> normal;
  return Eigen::VectorXd::NullaryExpr(samples, [&] { return normal(random); });
}

FailureKind kind_of(const std::vector<RecordSignals>& records, const OverlappedWindowsOptions& options) {
  try {
    estimate_overlapped_windows(records, options);
  } catch (const Failure& failure) {
    return failure.kind();
  }
  FAIL("no Failure was thrown");
  return FailureKind::internal_error;
}

TEST_CASE("overlapped windows: a static gain without noise is recovered to rounding") {
  const Eigen::VectorXd r = quiet_chirp(0.3, 20.0, 45.0, 0.1, 400.0);
  const RecordSignals record{r, 1.7 * r, -3.4 * r};
  const FrequencyResponse response = estimate_overlapped_windows({record, record}, at_rate(400.0));
  // The transforms round at 1e-16 of their largest line, and the weakest line kept is a hundredth in power
  // times 1/f below it.
  CHECK((response.response().array() + 2.0).abs().maxCoeff() < 1e-12);
  CHECK((response.b.array() - 1.7).abs().maxCoeff() < 1e-12);
  CHECK(response.variance().maxCoeff() < 1e-20);
  CHECK((response.coherence_ry.array() - 1.0).abs().maxCoeff() < 1e-12);
  CHECK((response.coherence_uy.array() - 1.0).abs().maxCoeff() < 1e-12);
  CHECK(response.reference_based);
  CHECK(response.records == 2);
  CHECK(response.points() == static_cast<Eigen::Index>(response.noise.size()));
}

TEST_CASE("overlapped windows: a pure delay is recovered where the windows see the whole sweep") {
  // Quarter-window hops cancel the leakage of a delay τ to first order; what is left is (2πτ/T)²/2 times the
  // window's relative second moment 1/3, (2π · 0.0125/10.5)²/6 = 1e-5, up to 13 Hz where the record's last
  // windows are not all there: beyond, to first order 2π τ/T · flank with flank = cot(π · 3 s/10.5 s) = 0.8
  // or so, one at most.
  const Eigen::VectorXd r = quiet_chirp(0.3, 20.0, 45.0, 0.1, 400.0);
  const RecordSignals record{r, r, delayed(r, 5)};
  const FrequencyResponse response = estimate_overlapped_windows({record}, at_rate(400.0));
  const Eigen::VectorXcd estimate = response.response();
  double held = 0.0;
  const double first_order = 2.0 * M_PI * 0.0125 / 10.5;
  for (Eigen::Index k = 0; k < response.points(); ++k) {
    const double f = response.frequency_hz[k];
    const double error = std::abs(estimate[k] - std::polar(1.0, -2.0 * M_PI * f * 0.0125));
    INFO(f << " Hz");
    CHECK(error < first_order);
    if (f > 1.0 && f < 13.0) CHECK(error < 0.05 * first_order);
    held += error * error < 3.0 * response.variance()[k] ? 1.0 : 0.0;  // 95 % radius
  }
  // The allowance for resolution holds what is left for most lines, whatever its size, and is no blanket.
  CHECK(held > 0.9 * static_cast<double>(response.points()));
  CHECK(std::sqrt(response.variance().maxCoeff()) < 2.0 * first_order);
}

TEST_CASE("overlapped windows: the band follows the sweep, the hold does not hide the low octave") {
  for (const double low_hz : {0.3, 0.5}) {
    const Eigen::VectorXd r = quiet_chirp(low_hz, 20.0, 45.0, 0.1, 400.0);
    const FrequencyResponse response = estimate_overlapped_windows({{r, r, r}}, at_rate(400.0));
    INFO(low_hz << " Hz start, band " << response.frequency_hz[0] << " Hz up");
    // The 2 s fade-in leaves little of the hold: the first point may stand a quarter above, the octave is not
    // missed.
    CHECK(response.frequency_hz[0] < 1.25 * low_hz);
    CHECK(response.frequency_hz[0] > 0.75 * low_hz);
    CHECK(response.frequency_hz[response.points() - 1] > 19.0);
    CHECK(response.frequency_hz[response.points() - 1] < 21.0);
    for (Eigen::Index k = 1; k < response.points(); ++k)
      CHECK(response.frequency_hz[k] > response.frequency_hz[k - 1]);
  }
  OverlappedWindowsOptions options = at_rate(400.0);
  options.low_hz = 1.0;
  options.high_hz = 8.0;
  options.segment_s = 10.0;
  const Eigen::VectorXd r = quiet_chirp(0.3, 20.0, 45.0, 0.1, 400.0);
  const FrequencyResponse response = estimate_overlapped_windows({{r, r, r}}, options);
  CHECK(response.points() == 71);
  CHECK(response.frequency_hz[0] ==
        Approx(1.0).epsilon(0.01));  // a sweep's energy sits within a tenth of a line
  CHECK(response.frequency_hz[70] == Approx(8.0).epsilon(0.01));
}

TEST_CASE("overlapped windows: window lengths for usual records fill them and are quick to transform") {
  for (const auto& [duration_s, shortest_s, longest_s] :
       {std::tuple(25.0, 7.0, 11.0), std::tuple(45.0, 8.0, 11.0), std::tuple(90.0, 9.0, 13.0)}) {
    const Eigen::VectorXd r = quiet_chirp(0.3, 20.0, duration_s, 0.1, 400.0);
    const Eigen::Index length = choose_segment_length({{r, r, r}}, at_rate(400.0));
    INFO(duration_s << " s: window of " << static_cast<double>(length) / 400.0 << " s");
    CHECK(static_cast<double>(length) / 400.0 > shortest_s);
    CHECK(static_cast<double>(length) / 400.0 < longest_s);
    CHECK(length % 4 == 0);
    Eigen::Index rest = length;
    for (const Eigen::Index factor : {2, 3, 5, 7}) {
      while (rest % factor == 0) rest /= factor;
    }
    CHECK(rest == 1);
    // Left over at the ends: less than a twentieth of the record.
    CHECK((r.size() - length) % (length / 4) < r.size() / 20);
  }
}

TEST_CASE("overlapped windows, open loop: the predicted variance is Bendat and Piersol's") {
  // Random Data, 4th ed., ch. 9 (from memory): ε²(|Ĥ|) = (1-γ²)/(2 γ² n_d) and as much for the phase, so
  // E|Ĥ-H|²/|H|² = (1-γ²)/(γ² n_d). y = 2u + n, white: γ² = 4/(4 + 1) for unit noise. n_d: K windows share
  // Σ_j |c(j hop)|², c = 0.6592, 1/6, 0.0075 for Hann at hops of a quarter. K = 197: n_d = 101 with the ends
  // counted. E[1/Σ|U|²] exceeds 1/E by 1/n_d; thirty records of 157 lines leave sampling errors well below 1
  // %. Tolerance: 5 %.
  std::mt19937_64 random(21);
  OverlappedWindowsOptions options = at_rate(100.0);
  options.segment_s = 4.0;
  options.low_hz = 1.0;
  options.high_hz = 40.0;
  double predicted = 0.0, sampled = 0.0, count = 0.0, windows = 0.0, noise_psd = 0.0, direct = 0.0;
  for (int run = 0; run < 30; ++run) {
    const Eigen::VectorXd r = white(20000, random);
    const RecordSignals record{r, r, 2.0 * r + white(20000, random)};
    const FrequencyResponse response = estimate_overlapped_windows({record}, options);
    predicted += response.variance().sum();
    direct += response.direct_variance.sum();
    sampled += (response.response().array() - 2.0).abs2().sum();
    noise_psd += response.output_noise_psd.sum();
    count += static_cast<double>(response.points());
    windows = response.segments;
  }
  double shared = windows;
  const std::array<double, 3> overlap{0.6592, 1.0 / 6.0, 0.0075};
  for (std::size_t j = 0; j < 3; ++j)
    shared += 2.0 * (windows - 1.0 - static_cast<double>(j)) * overlap[j] * overlap[j];
  const double averages = windows * windows / shared, coherence = 0.8;
  const double published = 4.0 * (1.0 - coherence) / (coherence * averages);
  WARN("open loop, variance over Bendat & Piersol's: predicted "
       << predicted / count / published << ", sampled " << sampled / count / published << ", direct "
       << direct / count / published);
  CHECK(windows == 197.0);
  CHECK(predicted / count == Approx(published).epsilon(0.05));
  CHECK(sampled / count == Approx(published).epsilon(0.05));
  CHECK(direct / count == Approx(published).epsilon(0.05));
  CHECK(noise_psd / count == Approx(2.0 / 100.0).epsilon(0.01));  // white: 2 σ²/rate
}

TEST_CASE("overlapped windows without excitation: direct, b = 1 and free of noise, up to 0.4 of the rate") {
  std::mt19937_64 random(5);
  const Eigen::VectorXd u = white(12000, random);
  const RecordSignals record{{}, u, 0.5 * u + 0.1 * white(12000, random)};
  const FrequencyResponse response = estimate_overlapped_windows({record, record}, at_rate(100.0));
  CHECK_FALSE(response.reference_based);
  CHECK((response.b.array() == 1.0).all());
  CHECK(response.a == response.direct);
  for (const PairNoise& noise : response.noise) {
    CHECK(noise.bb == 0.0);
    CHECK(noise.ab == std::complex<double>{});
  }
  CHECK(response.frequency_hz[0] == Approx(0.2).epsilon(0.05));  // second line of windows of 10 s
  CHECK(response.frequency_hz[response.points() - 1] == Approx(40.0).epsilon(0.01));
  CHECK(response.coherence_ry.size() == 0);
  CHECK(response.coherence_ru.size() == 0);
  CHECK(response.coherence_uy.minCoeff() > 0.5);
  CHECK(response.direct_variance.isApprox(response.variance(), 1e-12));
  CHECK_FALSE(find_feedback_bias(response).present);
}

TEST_CASE("overlapped windows: same input, same bytes; records are not straddled") {
  std::mt19937_64 random(6);
  const Eigen::VectorXd r = quiet_chirp(0.5, 15.0, 20.0, 0.1, 200.0);
  const RecordSignals record{r, r + 0.01 * white(r.size(), random), r + 0.01 * white(r.size(), random)};
  const FrequencyResponse once = estimate_overlapped_windows({record}, at_rate(200.0));
  const FrequencyResponse again = estimate_overlapped_windows({record}, at_rate(200.0));
  CHECK(once.a == again.a);
  CHECK(once.variance() == again.variance());
  // Twice the same record: same slopes, twice the windows. A constant added to one record only is removed
  // with its mean.
  RecordSignals shifted = record;
  shifted.output.array() += 100.0;
  const FrequencyResponse both = estimate_overlapped_windows({record, shifted}, at_rate(200.0));
  CHECK(both.segments == 2.0 * once.segments);
  CHECK((both.a - once.a).cwiseAbs().maxCoeff() < 1e-10);  // rounding of 100 against signals of 0.1
  RecordSignals brief{r.head(200), r.head(200), r.head(200)};
  CHECK(estimate_overlapped_windows({record, brief}, at_rate(200.0)).settings.find("left out") !=
        std::string::npos);
}

TEST_CASE("overlapped windows: what cannot be estimated is refused") {
  const Eigen::VectorXd r = quiet_chirp(0.5, 15.0, 20.0, 0.1, 200.0);
  const Eigen::VectorXd zero = Eigen::VectorXd::Zero(r.size());
  const auto options = at_rate(200.0);
  CHECK(kind_of({}, options) == FailureKind::unsupported);
  CHECK(kind_of({{zero, r, r}}, options) == FailureKind::unsupported);
  CHECK(kind_of({{r, zero, r}}, options) == FailureKind::unsupported);
  CHECK(kind_of({{{}, zero, r}}, options) == FailureKind::unsupported);
  CHECK(kind_of({{r.head(10), r.head(10), r.head(10)}}, options) == FailureKind::unsupported);
  CHECK(kind_of({{r, r, r.head(100)}}, options) == FailureKind::bad_input);
  CHECK(kind_of({{r, r, r}, {{}, r, r}}, options) == FailureKind::bad_input);
  CHECK(kind_of({{r, r, r}}, at_rate(0.0)) == FailureKind::bad_input);
  RecordSignals broken{r, r, r};
  broken.output[100] = std::nan("");
  CHECK(kind_of({broken}, options) == FailureKind::bad_input);
  const auto with = [&](double low_hz, double high_hz, double segment_s) {
    OverlappedWindowsOptions changed = options;
    changed.low_hz = low_hz;
    changed.high_hz = high_hz;
    changed.segment_s = segment_s;
    return kind_of({{r, r, r}}, changed);
  };
  CHECK(with(0.0, 0.0, 30.0) == FailureKind::unsupported);  // longer than the record
  CHECK(with(0.0, 0.0, 0.01) == FailureKind::unsupported);  // two samples
  CHECK(with(0.0, 0.0, -1.0) == FailureKind::bad_input);
  CHECK(with(5.0, 4.0, 0.0) == FailureKind::bad_input);
  CHECK(with(0.0, 100.0, 0.0) == FailureKind::bad_input);
  CHECK(with(5.001, 5.002, 4.0) == FailureKind::unsupported);  // between two lines
}

}  // namespace
