// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/spectra/overlapped_windows.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "ident/failure.h"
#include "ident/spectra/excited_band.h"
#include "ident/spectra/resolution.h"
#include "ident/spectra/segment_regression.h"
#include "ident/spectra/segments.h"

namespace hoverwright::ident {
namespace {

constexpr Eigen::Index kShortestSegment = 16;
constexpr Eigen::Index kPoolReach = 16;  // lines beyond the band whose noise may be averaged in

void check_options(const OverlappedWindowsOptions& options) {
  const auto refuse = [](const std::string& problem) {
    throw Failure(FailureKind::bad_input, problem, "overlapped windows", "");
  };
  if (!(options.sample_rate_hz > 0.0) || !std::isfinite(options.sample_rate_hz))
    refuse("the sample rate must be positive");
  const double nyquist_hz = 0.5 * options.sample_rate_hz;
  if (!(options.low_hz >= 0.0) || !(options.high_hz >= 0.0) || !(options.segment_s >= 0.0)) {
    refuse("band and window length must not be negative");
  }
  if (options.high_hz >= nyquist_hz || options.low_hz >= nyquist_hz) {
    refuse(fmt::format("the band must end below half the sample rate, {:g} Hz", nyquist_hz));
  }
  if (options.high_hz > 0.0 && options.low_hz >= options.high_hz) {
    refuse(fmt::format("the band's lower end {:g} Hz is not below its upper end {:g} Hz", options.low_hz,
                       options.high_hz));
  }
  if (options.pool_degrees_of_freedom < 1) refuse("the noise needs one degree of freedom or more");
}

/// A constant leaves only rounding once its mean is removed.
bool moves_at_all(const Eigen::VectorXd& signal) {
  if (signal.size() == 0) return false;
  return signal.maxCoeff() - signal.minCoeff() > 1e-12 * signal.cwiseAbs().maxCoeff();
}

void check_records(const std::vector<RecordSignals>& records) {
  if (records.empty()) {
    throw Failure(FailureKind::unsupported, "there is no record to estimate from", "",
                  "Fly a record with excitation on this axis.");
  }
  const bool referred = records.front().excitation.size() > 0;
  bool moves = false, demand_moves = false;
  for (std::size_t k = 0; k < records.size(); ++k) {
    const RecordSignals& record = records[k];
    const std::string where = fmt::format("record {}", k + 1);
    if ((record.excitation.size() > 0) != referred) {
      throw Failure(FailureKind::bad_input, "some records have an excitation and some have none", where, "");
    }
    if (record.demand.size() != record.output.size() ||
        (referred && record.excitation.size() != record.output.size())) {
      throw Failure(FailureKind::bad_input, "excitation, demand and output differ in length", where, "");
    }
    if (!record.demand.allFinite() || !record.output.allFinite() || !record.excitation.allFinite()) {
      throw Failure(FailureKind::bad_input, "a sample is not a finite number", where,
                    "Repair or cut the log first.");
    }
    moves = moves || moves_at_all(referred ? record.excitation : record.demand);
    demand_moves = demand_moves || moves_at_all(record.demand);
  }
  if (!moves || !demand_moves) {
    throw Failure(FailureKind::unsupported,
                  moves || !referred ? "the demand does not move" : "the excitation does not move", "",
                  "Fly a record in which this axis is excited.");
  }
}

Eigen::Index segment_length(const std::vector<RecordSignals>& records,
                            const OverlappedWindowsOptions& options) {
  if (!(options.segment_s > 0.0)) return choose_segment_length(records, options);
  return 4 * static_cast<Eigen::Index>(std::llround(0.25 * options.segment_s * options.sample_rate_hz));
}

/// Lines whose energy lies nearer to them than to the next line, around the strongest of the band. Beyond a
/// sweep's ends every line only sees the sweep's edge again.
LineBand with_energy_of_their_own(const LineBand& band, const Eigen::VectorXd& energy,
                                  const Eigen::VectorXd& offset) {
  Eigen::Index strongest = 0;
  energy.segment(band.first, band.last - band.first + 1).maxCoeff(&strongest);
  strongest += band.first;
  LineBand kept{strongest, strongest};
  while (kept.first > band.first && std::abs(offset[kept.first - 1]) < 0.5) --kept.first;
  while (kept.last < band.last && std::abs(offset[kept.last + 1]) < 0.5) ++kept.last;
  return kept;
}

/// Lines to keep, never 0, 1 or the Nyquist line.
LineBand kept_lines(const Eigen::VectorXd& energy, const Eigen::VectorXd& offset, bool referred,
                    Eigen::Index length, const OverlappedWindowsOptions& options) {
  const double resolution_hz = options.sample_rate_hz / static_cast<double>(length);
  LineBand band{
      2, std::min(length / 2 - 1, static_cast<Eigen::Index>(0.4 * options.sample_rate_hz / resolution_hz))};
  if (referred && !(options.low_hz > 0.0 && options.high_hz > 0.0)) {
    const std::optional<LineBand> excited = excited_lines(energy.head(length / 2));
    if (!excited)
      throw Failure(FailureKind::unsupported, "no line is excited", "", "Fly a record with excitation.");
    band = *excited;
  }
  // A line within a thousandth of its spacing of the asked limit is meant to be in.
  if (options.low_hz > 0.0) {
    band.first = std::max<Eigen::Index>(
        2, static_cast<Eigen::Index>(std::ceil(options.low_hz / resolution_hz - 1e-3)));
  }
  if (options.high_hz > 0.0) {
    band.last = std::min(length / 2 - 1, static_cast<Eigen::Index>(options.high_hz / resolution_hz + 1e-3));
  }
  if (band.first > band.last) {
    throw Failure(FailureKind::unsupported,
                  fmt::format("no line lies in the band at a resolution of {:.3g} Hz", resolution_hz), "",
                  "Use longer windows or a wider band.");
  }
  for (Eigen::Index m = band.first; m <= band.last; ++m) {
    if (energy[m] > 0.0) continue;
    throw Failure(FailureKind::unsupported,
                  fmt::format("nothing is excited at {:.4g} Hz", static_cast<double>(m) * resolution_hz), "",
                  "Narrow the band to what was excited.");
  }
  if (referred) band = with_energy_of_their_own(band, energy, offset);
  return band;
}

double squared_coherence(const Eigen::MatrixXcd& x, const Eigen::MatrixXcd& y, Eigen::Index m) {
  const double power = x.col(m).squaredNorm() * y.col(m).squaredNorm();
  return power > 0.0 ? std::norm(x.col(m).dot(y.col(m))) / power : 0.0;
}

/// Correlation of the slopes' noise between lines m and m+d; the scale of the noise cancels.
std::complex<double> slope_correlation(const Eigen::MatrixXcd& regressor, const SegmentRegression& regression,
                                       const NoiseCorrelation& correlation, Eigen::Index m, int d) {
  const double scale =
      regression.energy[m] * regression.inflation[m] * regression.energy[m + d] * regression.inflation[m + d];
  return correlation.form(regressor.col(m), regressor.col(m + d), m, d) / std::sqrt(scale);
}

void fill_neighbours(const Eigen::MatrixXcd& regressor, const SegmentRegression& regression,
                     const NoiseCorrelation& correlation, const LineBand& band, FrequencyResponse& response) {
  const Eigen::Index points = band.last - band.first + 1;
  for (int d = 1; d <= 2; ++d) {
    Eigen::VectorXcd& target = response.neighbour_correlation[static_cast<std::size_t>(d - 1)];
    target = Eigen::VectorXcd::Zero(points);
    for (Eigen::Index k = 0; k + d < points; ++k) {
      target[k] = slope_correlation(regressor, regression, correlation, band.first + k, d);
    }
  }
}

/// Sums over groups of windows that together last about one window length.
std::vector<ResponseStretch> split_in_time(const SegmentSpectra& spectra, const Eigen::MatrixXcd& regressor,
                                           const SegmentRegression& regression, const LineBand& band) {
  const Eigen::Index points = band.last - band.first + 1;
  const Eigen::Index group = spectra.length / spectra.hop;
  std::vector<ResponseStretch> stretches;
  Eigen::Index in_group = 0;
  for (Eigen::Index k = 0; k < spectra.segments(); ++k) {
    const int record = spectra.record[static_cast<std::size_t>(k)];
    if (stretches.empty() || stretches.back().record != record || in_group == group) {
      stretches.push_back({record, Eigen::VectorXcd::Zero(points), Eigen::VectorXcd::Zero(points)});
      in_group = 0;
    }
    ++in_group;
    for (Eigen::Index i = 0; i < points; ++i) {
      const Eigen::Index m = band.first + i;
      const std::complex<double> weight = std::conj(regressor(k, m)) / regression.energy[m];
      stretches.back().a[i] += weight * spectra.output(k, m);
      stretches.back().b[i] += weight * spectra.demand(k, m);
    }
  }
  return stretches;
}

std::string describe(const SegmentSpectra& spectra, double sample_rate_hz) {
  std::string text = fmt::format("Hann windows of {:.4g} s, 75 % overlap, {} windows of {} record{}",
                                 static_cast<double>(spectra.length) / sample_rate_hz, spectra.segments(),
                                 spectra.records, spectra.records == 1 ? "" : "s");
  if (spectra.short_records > 0) {
    text += fmt::format("; {} record{} shorter than a window left out", spectra.short_records,
                        spectra.short_records == 1 ? "" : "s");
  }
  return text;
}

void fill_points(const SegmentSpectra& spectra, const SegmentRegression& main,
                 const SegmentRegression& direct, const PooledNoise& pooled, const PooledNoise& pooled_direct,
                 const Eigen::VectorXd& offset, const LineBand& band, FrequencyResponse& response) {
  const Eigen::Index points = band.last - band.first + 1;
  const double line_hz = response.sample_rate_hz / static_cast<double>(spectra.length);
  const double density = 2.0 / (response.sample_rate_hz * spectra.window.squaredNorm());
  response.frequency_hz.resize(points);
  response.direct_variance.resize(points);
  response.output_noise_psd.resize(points);
  response.coherence_uy.resize(points);
  if (response.reference_based) {
    response.coherence_ry.resize(points);
    response.coherence_ru.resize(points);
  }
  for (Eigen::Index k = 0; k < points; ++k) {
    const Eigen::Index m = band.first + k;
    const PairNoise& noise = pooled.spectrum[static_cast<std::size_t>(m)];
    const double scale = main.inflation[m] / main.energy[m];
    response.noise.push_back({noise.aa * scale, noise.bb * scale, noise.ab * scale});
    response.frequency_hz[k] = (static_cast<double>(m) + offset[m]) * line_hz;
    response.direct_variance[k] =
        pooled_direct.spectrum[static_cast<std::size_t>(m)].aa * direct.inflation[m] / direct.energy[m];
    response.output_noise_psd[k] = density * noise.aa;
    response.coherence_uy[k] = squared_coherence(spectra.demand, spectra.output, m);
    if (response.reference_based) {
      response.coherence_ry[k] = squared_coherence(spectra.excitation, spectra.output, m);
      response.coherence_ru[k] = squared_coherence(spectra.excitation, spectra.demand, m);
    }
  }
  response.a = main.a.segment(band.first, points);
  response.b = main.b.segment(band.first, points);
  response.direct = direct.a.segment(band.first, points);
  response.degrees_of_freedom = pooled.degrees_of_freedom.segment(band.first, points);
}

}  // namespace

FrequencyResponse estimate_overlapped_windows(const std::vector<RecordSignals>& records,
                                              const OverlappedWindowsOptions& options) {
  check_options(options);
  check_records(records);
  const Eigen::Index length = segment_length(records, options);
  if (length < kShortestSegment) {
    throw Failure(FailureKind::unsupported, fmt::format("a window of {} samples is too short", length), "",
                  "Give longer records or a longer window.");
  }
  const SegmentSpectra spectra = cut_segments(records, length);
  if (spectra.segments() < 2) {
    throw Failure(FailureKind::unsupported,
                  fmt::format("the records are too short for two windows of {:.3g} s",
                              static_cast<double>(length) / options.sample_rate_hz),
                  "", "Give longer records or a shorter window.");
  }

  FrequencyResponse response;
  response.reference_based = spectra.excitation.size() > 0;
  response.method = response.reference_based ? "overlapped windows, referred to the excitation"
                                             : "overlapped windows, direct (output over demand)";
  response.settings = describe(spectra, options.sample_rate_hz);
  response.records = spectra.records;
  response.sample_rate_hz = options.sample_rate_hz;
  response.segments = static_cast<double>(spectra.segments());

  const NoiseCorrelation correlation(spectra);
  const Eigen::MatrixXcd& regressor = response.reference_based ? spectra.excitation : spectra.demand;
  const EnergyOffset offset = energy_offset(spectra);
  const LineBand band = kept_lines(regressor.colwise().squaredNorm().transpose(), offset.lines,
                                   response.reference_based, length, options);
  // The noise of the lines at the band's ends is averaged over lines beyond them as well.
  const LineBand around{std::max<Eigen::Index>(2, band.first - kPoolReach),
                        std::min(length / 2 - 1, band.last + kPoolReach)};
  const double wanted = options.pool_degrees_of_freedom;
  const SegmentRegression direct = regress_segments(spectra, spectra.demand, {}, correlation, around);
  const SegmentRegression main =
      response.reference_based
          ? regress_segments(spectra, regressor, spectra.excitation_slope, correlation, around)
          : direct;
  const PooledNoise pooled = pool_noise(main, correlation, around, wanted);
  const PooledNoise pooled_direct = pool_noise(direct, correlation, around, wanted);
  fill_points(spectra, main, direct, pooled, pooled_direct, offset.lines, band, response);
  if (!response.reference_based) {
    // The demand's residual on itself is rounding; by definition the pair has b = 1 without noise.
    response.b.setOnes();
    for (PairNoise& noise : response.noise) noise = {noise.aa, 0.0, {}};
  }
  fill_neighbours(regressor, main, correlation, band, response);
  if (response.reference_based) response.stretches = split_in_time(spectra, regressor, main, band);
  if (response.reference_based)
    allow_for_resolution(offset.flank.segment(band.first, response.points()), response);
  return response;
}

}  // namespace hoverwright::ident
