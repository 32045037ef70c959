// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/identify.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "ident/commands/study.h"
#include "ident/failure.h"
#include "ident/files.h"
#include "ident/fitting/model_fit.h"
#include "ident/fitting/validation.h"
#include "ident/flight_log/records.h"
#include "ident/spectra/overlapped_windows.h"

namespace hoverwright::ident {
namespace {

using reports::AxisResult;
using reports::IdentifyResult;

/// Coherence above which a direct response is said to carry information; common practice.
constexpr double kUsefulCoherence = 0.6;

RecordSignals cut(const AxisSignals& signals, Eigen::Index first, Eigen::Index last) {
  const Eigen::Index count = last - first;
  RecordSignals record;
  if (signals.excitation.size() > 0) record.excitation = signals.excitation.segment(first, count);
  record.demand = signals.demand.segment(first, count);
  record.output = signals.output.segment(first, count);
  return record;
}

OverlappedWindowsOptions spectra_options(const FlightData& data, const IdentifyOptions& options) {
  OverlappedWindowsOptions spectra;
  spectra.sample_rate_hz = data.sample_rate_hz;
  spectra.low_hz = options.low_hz;
  spectra.high_hz = options.high_hz;
  spectra.segment_s = options.segment_s;
  return spectra;
}

/// Longest run of lines whose coherence is useful, or an empty string.
std::string coherent_band(const FrequencyResponse& response) {
  Eigen::Index best_first = 0;
  Eigen::Index best_length = 0;
  Eigen::Index first = 0;
  for (Eigen::Index k = 0; k < response.points(); ++k) {
    if (response.coherence_uy(k) < kUsefulCoherence) {
      first = k + 1;
    } else if (k - first + 1 > best_length) {
      best_first = first;
      best_length = k - first + 1;
    }
  }
  if (best_length < 2) return {};
  return fmt::format("{}-{} Hz", significant(response.frequency_hz(best_first), 2),
                     significant(response.frequency_hz(best_first + best_length - 1), 2));
}

std::string direct_reason(const FrequencyResponse& response) {
  const std::string band = coherent_band(response);
  const std::string information =
      band.empty() ? fmt::format(
                         "Demand and output are nowhere coherent above {:.1f}, so even the biased answer is "
                         "mostly noise. ",
                         kUsefulCoherence)
                   : fmt::format("Demand and output are coherent (above {:.1f}) only over {}. ",
                                 kUsefulCoherence, band);
  return "no excitation was logged, so only the direct estimate demand-to-output exists and feedback biases "
         "it: at "
         "frequencies where gusts or noise drive the loop it shows minus the inverse of the controller, not "
         "the vehicle. " +
         information +
         "Neither effectiveness, damping, lag nor delay can be identified; fly a schedule and log its "
         "excitation.";
}

/// The doublet with half a second before and a second after: longer, and the gusts around it are judged
/// instead.
RecordSignals validation_cut(const AxisSignals& signals, const Record& record, double sample_rate_hz) {
  const auto samples = [&](double seconds) {
    return static_cast<Eigen::Index>(std::llround(seconds * sample_rate_hz));
  };
  return cut(signals, std::max(record.span_first, record.first - samples(0.5)),
             std::min(record.span_last, record.last + samples(1.0)));
}

void fit_axis(AxisResult& result, const AxisSetup& setup, const AxisSignals& signals,
              const std::vector<Record>& doublets) {
  ModelFit fit = fit_model(result.response, Structure::find(setup.structure));
  if (fit.status != FitStatus::converged) {
    result.no_model_reason = fmt::format("{} could not be fitted: {}", setup.structure, fit.reason);
    return;
  }
  for (const Record& record : doublets) {
    const RecordSignals cut_signals = validation_cut(signals, record, result.response.sample_rate_hz);
    result.validation.push_back(validate(fit, cut_signals.demand, cut_signals.output));
  }
  result.model = std::move(fit);
}

AxisResult identify_axis(Axis axis, const FlightData& data, const Vehicle& vehicle,
                         const std::vector<Record>& records, const IdentifyOptions& options) {
  const AxisSignals& signals = *data.axes[axis_index(axis)];
  std::vector<RecordSignals> sweeps;
  std::vector<Record> doublets;
  for (const Record& record : records) {
    if (record.axis != axis) continue;
    if (record.kind == RecordKind::doublet) {
      doublets.push_back(record);
    } else {
      sweeps.push_back(cut(signals, record.span_first, record.span_last));
    }
  }
  AxisResult result;
  if (signals.excitation.size() == 0) {
    result.response =
        estimate_overlapped_windows({cut(signals, 0, data.samples)}, spectra_options(data, options));
    result.no_model_reason = direct_reason(result.response);
    return result;
  }
  if (sweeps.empty()) {
    result.no_model_reason = "the log holds no sweep on this axis; fly at least one chirp record on it";
    return result;
  }
  result.response = estimate_overlapped_windows(sweeps, spectra_options(data, options));
  result.feedback_bias = find_feedback_bias(result.response);
  if (options.responses_only) {
    result.no_model_reason = "models were not asked for (--responses-only)";
    return result;
  }
  fit_axis(result, *vehicle.axes[axis_index(axis)], signals, doublets);
  return result;
}

void collect_warnings(IdentifyResult& result, const FlightData& data, const IdentifyOptions& options) {
  for (const auto& [axis, found] : result.axes) {
    if (found.model || found.no_model_reason.empty()) continue;
    if (options.responses_only && found.response.reference_based) continue;  // asked for, nothing to warn of
    result.warnings.push_back(fmt::format("{}: no model: {}", axis_name(axis), found.no_model_reason));
  }
  for (const auto& [axis, found] : result.axes) {
    if (!found.feedback_bias.present) continue;
    result.warnings.push_back(
        fmt::format("{}: the direct estimate demand-to-output is off by {:.0f} % (median) over {}-{} Hz, "
                    "beyond both error bands: "
                    "feedback bias. The reference-based response shown is not affected.",
                    axis_name(axis), 100.0 * found.feedback_bias.median_difference,
                    significant(found.feedback_bias.low_hz, 2), significant(found.feedback_bias.high_hz, 2)));
  }
  for (const auto& [axis, found] : result.axes) {
    if (!found.model) continue;
    for (const std::string& warning : found.model->warnings) {
      result.warnings.push_back(fmt::format("{}: {}", axis_name(axis), warning));
    }
  }
  result.warnings.insert(result.warnings.end(), data.warnings.begin(), data.warnings.end());
}

void print_model(const ModelFit& model, std::ostream& out) {
  for (const ParameterEstimate& parameter : model.parameters) {
    const bool seconds = parameter.unit == "s";
    const double factor = seconds ? 1000.0 : 1.0;
    out << fmt::format("  {:<14} {:>9} {:<8} ({} .. {}){}\n", parameter.name,
                       significant(parameter.value * factor), seconds ? "ms" : parameter.unit,
                       significant(parameter.low * factor), significant(parameter.high * factor),
                       parameter.identifiable ? "" : "   not identifiable from this flight");
  }
  out << fmt::format("  residual {:.2f} x expected (reduced chi-square), {} points, {}-{} Hz\n",
                     model.reduced_chi_square, model.points, significant(model.band_low_hz, 2),
                     significant(model.band_high_hz, 3));
}

void print_axis(Axis axis, const AxisResult& result, std::ostream& out) {
  const FrequencyResponse& response = result.response;
  out << fmt::format("{}", axis_name(axis));
  if (result.model) {
    out << fmt::format(": {}, {}; brackets are 95 % intervals\n", result.model->structure,
                       Structure::find(result.model->structure).formula());
    print_model(*result.model, out);
    if (!result.validation.empty()) {
      out << "  doublets never used in the fit:";
      for (std::size_t i = 0; i < result.validation.size(); ++i) {
        out << fmt::format("{} {:.0f} % reproduced (Theil {:.2f})", i == 0 ? "" : ",",
                           result.validation[i].fit_percent, result.validation[i].theil_inequality);
      }
      out << "\n";
    }
    return;
  }
  if (response.points() > 0) {
    out << fmt::format(": {} response, {} lines over {}-{} Hz",
                       response.reference_based ? "reference-based" : "direct (biased by feedback)",
                       response.points(), significant(response.frequency_hz(0), 2),
                       significant(response.frequency_hz(response.points() - 1), 3));
    const std::string band = coherent_band(response);
    out << (band.empty() ? ", coherent nowhere" : ", coherent over " + band) << "\n";
  } else {
    out << ": no response\n";
  }
}

std::string command_text(const IdentifyOptions& options) {
  std::string text = "identify";
  if (options.range.from_s != 0.0) text += fmt::format(" --from {}", options.range.from_s);
  if (options.range.to_s) text += fmt::format(" --to {}", *options.range.to_s);
  if (options.low_hz != 0.0) text += fmt::format(" --low {}", options.low_hz);
  if (options.high_hz != 0.0) text += fmt::format(" --high {}", options.high_hz);
  if (options.segment_s != 0.0) text += fmt::format(" --segment {}", options.segment_s);
  if (options.responses_only) text += " --responses-only";
  return text;
}

/// The failure for axes without a model, or nothing.
void refuse_missing_models(const IdentifyResult& result) {
  std::string axes;
  std::string reason;
  for (const auto& [axis, found] : result.axes) {
    if (found.model) continue;
    axes += fmt::format("{}{}", axes.empty() ? "" : ", ", axis_name(axis));
    if (reason.empty()) reason = found.no_model_reason;
  }
  if (axes.empty()) return;
  const bool no_excitation = std::all_of(result.axes.begin(), result.axes.end(), [](const auto& entry) {
    return entry.second.model || !entry.second.response.reference_based;
  });
  throw Failure(FailureKind::unsupported,
                fmt::format("no model of {}: {}", axes, no_excitation ? "no excitation was logged" : reason),
                "",
                no_excitation ? "The responses were written; they are direct estimates. Fly a schedule and "
                                "log its excitation, or pass "
                                "--responses-only if responses are all you want."
                              : "The responses were written.");
}

}  // namespace

IdentifyResult identify_flight(const FlightData& data, const Vehicle& vehicle,
                               const IdentifyOptions& options) {
  const std::vector<Record> records = find_records(data);
  IdentifyResult result;
  result.vehicle_name = vehicle.name;
  for (const Axis axis : kAxes) {
    if (!data.axes[axis_index(axis)]) continue;
    result.axes[axis] = identify_axis(axis, data, vehicle, records, options);
  }
  collect_warnings(result, data, options);
  return result;
}

void run_identify(const IdentifyOptions& options, std::ostream& out) {
  const Vehicle vehicle = read_vehicle(vehicle_file(options.study));
  const std::filesystem::path log = options.log ? *options.log : only_log(options.study);
  const FlightData data = map_log(read_csv(log), vehicle, options.range);
  const IdentifyResult result = identify_flight(data, vehicle, options);
  const reports::Provenance provenance =
      make_provenance(options.study, command_text(options), {vehicle_file(options.study), log});
  const std::string responses = responses_to_json(result, provenance);
  const std::string models = models_to_json(result, provenance);
  write_file(responses_file(options.study), responses);
  // Also when no model was asked for or none was possible: an older file would belong to other responses.
  write_file(models_file(options.study), models);

  if (options.json) {
    out << (options.responses_only ? responses : models) << "\n";
  } else {
    for (const auto& [axis, found] : result.axes) print_axis(axis, found, out);
    for (const std::string& warning : result.warnings) out << "warning: " << warning << "\n";
    out << fmt::format("written: {}, {}\n", responses_file(options.study).string(),
                       models_file(options.study).string());
  }
  if (!options.responses_only) refuse_missing_models(result);
}

}  // namespace hoverwright::ident
