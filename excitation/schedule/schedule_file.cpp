// SPDX-License-Identifier: GPL-3.0-or-later
// schedule.json, format hoverwright.schedule/1.
#include <fmt/format.h>

#include <nlohmann/json.hpp>

#include "excitation/schedule/schedule.h"
#include "ident/failure.h"
#include "ident/files.h"
#include "ident/strict_json.h"

namespace hoverwright::excitation {
namespace {

using ident::StrictObject;
using Json = nlohmann::ordered_json;

constexpr const char* kFormat = "hoverwright.schedule/1";
constexpr const char* kEstimate = "estimate";
constexpr const char* kValidation = "validation";

Json signal_to_json(const Chirp& chirp) {
  return {{"kind", "chirp"},
          {"amplitude", chirp.amplitude},
          {"low_hz", chirp.low_hz},
          {"high_hz", chirp.high_hz},
          {"duration_s", chirp.duration_s},
          {"hold_cycles", chirp.hold_cycles},
          {"fade_in_s", chirp.fade_in_s},
          {"fade_out_s", chirp.fade_out_s}};
}

Json signal_to_json(const Doublet& doublet) {
  return {{"kind", "doublet"}, {"amplitude", doublet.amplitude}, {"duration_s", doublet.duration_s}};
}

Json options_to_json(const ScheduleOptions& options) {
  Json amplitude = Json::object();
  for (const auto& [axis, value] : options.amplitude) amplitude[std::string(ident::axis_name(axis))] = value;
  return {{"low_hz", options.low_hz},         {"high_hz", options.high_hz},
          {"record_s", options.record_s},     {"repeats", options.repeats},
          {"trim_s", options.trim_s},         {"fade_s", options.fade_s},
          {"doublet_s", options.doublet_s},   {"demand_share", options.demand_share},
          {"lean_share", options.lean_share}, {"amplitude", amplitude},
          {"reserve_s", options.reserve_s}};
}

/// Runs a signal's check and gives its complaint the place in the file.
template <typename Signal>
Signal checked(const Signal& signal, const StrictObject& object) {
  try {
    signal.check();
  } catch (const ident::Failure& failure) {
    object.fail(failure.where(), failure.problem(), failure.advice());
  }
  return signal;
}

std::variant<Chirp, Doublet> read_signal(StrictObject object) {
  const std::string kind = object.text("kind");
  if (kind == "chirp") {
    Chirp chirp;
    chirp.amplitude = object.positive("amplitude");
    chirp.low_hz = object.positive("low_hz");
    chirp.high_hz = object.positive("high_hz");
    chirp.duration_s = object.positive("duration_s");
    chirp.hold_cycles = object.positive("hold_cycles");
    chirp.fade_in_s = object.non_negative("fade_in_s");
    chirp.fade_out_s = object.non_negative("fade_out_s");
    object.finish();
    return checked(chirp, object);
  }
  if (kind == "doublet") {
    Doublet doublet;
    doublet.amplitude = object.positive("amplitude");
    doublet.duration_s = object.positive("duration_s");
    object.finish();
    return checked(doublet, object);
  }
  object.fail("kind", fmt::format("\"{}\" is not a kind of signal", kind), "Use \"chirp\" or \"doublet\".");
}

ScheduledRecord read_record(StrictObject object) {
  ScheduledRecord record;
  record.name = object.text("name");
  const std::string axis = object.text("axis");
  const auto known_axis = ident::axis_from_name(axis);
  if (!known_axis)
    object.fail("axis", fmt::format("\"{}\" is not an axis", axis), "Use roll, pitch, yaw or heave.");
  record.axis = *known_axis;
  const std::string purpose = object.text("purpose");
  if (purpose != kEstimate && purpose != kValidation) {
    object.fail("purpose", fmt::format("\"{}\" is not a purpose", purpose),
                "Use \"estimate\" or \"validation\".");
  }
  record.validation = purpose == kValidation;
  record.start_s = object.non_negative("start_s");
  record.signal = read_signal(object.object("signal"));
  object.finish();
  return record;
}

void check_provenance(StrictObject object) {
  object.text("program_version");
  object.text("command");
  StrictObject inputs = object.object("inputs");
  for (const std::string& name : inputs.keys()) inputs.text(name);
  inputs.finish();
  StrictObject options = object.object("options");
  for (const std::string& name : options.keys()) {
    if (name != "amplitude") {
      options.number(name);
      continue;
    }
    StrictObject amplitude = options.object(name);
    for (const std::string& axis : amplitude.keys()) amplitude.positive(axis);
    amplitude.finish();
  }
  options.finish();
  object.finish();
}

/// What must hold between the records. `places` are the records in the file, for messages.
void check_records(const Schedule& schedule, const std::vector<StrictObject>& places) {
  double free_from_s = 0.0;
  for (std::size_t k = 0; k < schedule.records.size(); ++k) {
    const ScheduledRecord& record = schedule.records[k];
    if (record.start_s < free_from_s) {
      places[k].fail("start_s", fmt::format("{} starts at {} s, before the record before it ends at {} s",
                                            record.name, record.start_s, free_from_s));
    }
    free_from_s = record.start_s + record.duration_s();
    // 1e-9 s: the sum of two rounded times.
    if (free_from_s > schedule.duration_s + 1e-9) {
      places[k].fail("start_s", fmt::format("{} ends at {} s, after the schedule's {} s", record.name,
                                            free_from_s, schedule.duration_s));
    }
    const auto* chirp = std::get_if<Chirp>(&record.signal);
    if (chirp != nullptr && chirp->high_hz >= 0.5 * schedule.sample_rate_hz) {
      places[k].fail("signal", fmt::format("high_hz, {} Hz, is not below half of the loop rate, {} Hz",
                                           chirp->high_hz, schedule.sample_rate_hz));
    }
  }
}

}  // namespace

std::string schedule_to_json(const Schedule& schedule, const ScheduleOptions& options,
                             const std::string& vehicle_sha256) {
  Json records = Json::array();
  for (const ScheduledRecord& record : schedule.records) {
    records.push_back(
        {{"name", record.name},
         {"axis", ident::axis_name(record.axis)},
         {"purpose", record.validation ? kValidation : kEstimate},
         {"start_s", record.start_s},
         {"signal", std::visit([](const auto& any) { return signal_to_json(any); }, record.signal)}});
  }
  const Json file = {{"format", kFormat},
                     {"provenance",
                      {{"program_version", HOVERWRIGHT_VERSION},
                       {"command", "schedule"},
                       {"inputs", {{"vehicle.json", vehicle_sha256}}},
                       {"options", options_to_json(options)}}},
                     {"vehicle", schedule.vehicle_name},
                     {"sample_rate_hz", schedule.sample_rate_hz},
                     {"duration_s", schedule.duration_s},
                     {"reserve_s", schedule.reserve_s},
                     {"endurance_s", schedule.endurance_s},
                     {"trim_s", schedule.trim_s},
                     {"records", records},
                     {"cautions", schedule.cautions}};
  return file.dump(2) + "\n";
}

Schedule parse_schedule(std::string_view text, const std::string& source) {
  const nlohmann::json json = ident::parse_json(text, source);
  StrictObject file(json, source, "");
  const std::string format = file.text("format");
  if (format != kFormat) {
    file.fail("format", fmt::format("\"{}\" is not \"{}\"", format, kFormat), "Plan the schedule again.");
  }
  check_provenance(file.object("provenance"));
  Schedule schedule;
  schedule.vehicle_name = file.text("vehicle");
  schedule.sample_rate_hz = file.positive("sample_rate_hz");
  schedule.duration_s = file.positive("duration_s");
  schedule.reserve_s = file.non_negative("reserve_s");
  schedule.endurance_s = file.positive("endurance_s");
  schedule.trim_s = file.non_negative("trim_s");
  const nlohmann::json& records = file.array("records");
  std::vector<StrictObject> places;
  for (std::size_t k = 0; k < records.size(); ++k) {
    places.emplace_back(records[k], source, fmt::format("/records/{}", k));
    schedule.records.push_back(read_record(places.back()));
  }
  if (schedule.records.empty())
    file.fail("records", "the schedule has no records", "Plan the schedule again.");
  const nlohmann::json& cautions = file.array("cautions");
  for (std::size_t k = 0; k < cautions.size(); ++k) {
    if (!cautions[k].is_string()) {
      throw ident::Failure(ident::FailureKind::bad_input, "text in quotes is needed",
                           fmt::format("{}: {}/{}", source, file.pointer("cautions"), k), "");
    }
    schedule.cautions.push_back(cautions[k].get<std::string>());
  }
  file.finish();
  check_records(schedule, places);
  return schedule;
}

Schedule read_schedule(const std::filesystem::path& path) {
  return parse_schedule(ident::read_file(path), path.string());
}

}  // namespace hoverwright::excitation
