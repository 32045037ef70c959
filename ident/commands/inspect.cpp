// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/inspect.h"

#include <fmt/format.h>

#include <algorithm>
#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "ident/commands/study.h"
#include "ident/failure.h"
#include "ident/flight_log/channel_health.h"
#include "ident/flight_log/csv_reader.h"
#include "ident/flight_log/flight_data.h"
#include "ident/flight_log/records.h"
#include "ident/flight_log/role_guess.h"
#include "ident/strict_json.h"
#include "ident/vehicle/units.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::ident {
namespace {

/// One column the vehicle file names.
struct Mapping {
  std::string role;  // "roll output"
  std::string column;
  std::string detail;  // unit and scale
  bool found = false;
  std::string nearest;  // when not found
};

struct FoundRecord {
  Record record;
  double from_s, to_s;
};

/// Everything the command has to say.
struct Inspection {
  std::string log, vehicle;
  long rows = 0;
  TimeHealth time;
  bool unit_assumed = false;
  std::vector<ChannelHealth> channels;
  std::vector<Mapping> mappings;
  bool mapped = false;
  std::string not_mapped, not_mapped_advice;  // why the log could not be mapped
  std::vector<std::string> warnings;
  bool excitation_mapped = false;
  std::vector<FoundRecord> records;
};

std::vector<Mapping> mappings_of(const Vehicle& vehicle, const LogTable& log) {
  std::vector<Mapping> mappings;
  const auto add = [&](const std::string& role, const std::string& column, const std::string& detail) {
    const bool found = std::find(log.names.begin(), log.names.end(), column) != log.names.end();
    mappings.push_back({role, column, detail, found,
                        found ? std::string() : nearest_word(column, {log.names.begin(), log.names.end()})});
  };
  add("time", vehicle.time.name, vehicle.time.unit);
  for (const Axis axis : kAxes) {
    const auto& setup = vehicle.axes[axis_index(axis)];
    if (!setup) continue;
    const auto add_channel = [&](std::string_view role, const Channel& channel) {
      const std::string unit = channel.unit == "1" ? "normalised" : channel.unit;
      add(fmt::format("{} {}", axis_name(axis), role), channel.name,
          channel.scale == 1.0 ? unit : fmt::format("{:.4g} x, {}", channel.scale, unit));
    };
    if (setup->channels.excitation) add_channel("excitation", *setup->channels.excitation);
    add_channel("demand", setup->channels.demand);
    add_channel("output", setup->channels.output);
  }
  return mappings;
}

/// Seconds per unit of a time column nobody has described, from its name or, failing that, the size of its
/// steps: logs run at a few hertz to a few kilohertz.
double assumed_time_unit(const TimeHealth& in_own_units) {
  const std::string& name = in_own_units.name;
  if (name.ends_with("_us") || name.ends_with("US")) return 1e-6;
  if (name.ends_with("_ms") || name.ends_with("MS")) return 1e-3;
  if (name.ends_with("_s")) return 1.0;
  const double step = 1.0 / in_own_units.rate_hz;
  return step < 0.7 ? 1.0 : (step < 70.0 ? 1e-3 : 1e-6);
}

void map_and_find_records(const LogTable& log, const Vehicle& vehicle, Inspection& inspection) {
  try {
    const FlightData data = map_log(log, vehicle, {});
    inspection.mapped = true;
    inspection.warnings = data.warnings;
    for (const auto& signals : data.axes) {
      if (signals && signals->excitation.size() > 0) inspection.excitation_mapped = true;
    }
    for (const Record& record : find_records(data)) {
      inspection.records.push_back({record, data.time_s(record.first), data.time_s(record.last)});
    }
  } catch (const Failure& failure) {
    if (failure.kind() != FailureKind::bad_input) throw;
    inspection.not_mapped = failure.problem();
    inspection.not_mapped_advice = failure.advice();
  }
}

Inspection inspect(const InspectOptions& options) {
  std::optional<Vehicle> vehicle;
  if (options.vehicle) vehicle = read_vehicle(*options.vehicle);
  const LogTable log = read_csv(options.log);

  Inspection inspection;
  inspection.log = options.log.string();
  inspection.rows = static_cast<long>(log.columns.front().size());
  const bool time_known =
      vehicle && std::find(log.names.begin(), log.names.end(), vehicle->time.name) != log.names.end();
  if (time_known) {
    const double unit_s = unit_to_si(vehicle->time.unit, Quantity::time).value();
    inspection.time = examine_time(log, vehicle->time.name, unit_s);
  } else {
    const TimeHealth in_own_units = examine_time(log, "", 1.0);
    inspection.time = examine_time(log, in_own_units.name, assumed_time_unit(in_own_units));
    inspection.unit_assumed = true;
  }
  inspection.channels = examine_channels(log, inspection.time);
  if (vehicle) {
    inspection.vehicle = options.vehicle->string();
    inspection.mappings = mappings_of(*vehicle, log);
    map_and_find_records(log, *vehicle, inspection);
  }
  return inspection;
}

std::string share_text(double share) {
  return share == 0.0 ? "-" : fmt::format("{:.1f} %", 100.0 * share);
}

std::string unit_word(double unit_s) {
  return unit_s == 1.0 ? "s" : (unit_s == 1e-3 ? "ms" : "us");
}

/// Mapped role, or what the name hints at.
std::string role_text(const ChannelHealth& channel, const Inspection& inspection) {
  if (inspection.mappings.empty()) {
    const auto guess = guess_role(channel.name);
    return guess ? *guess + "?" : "";
  }
  const auto mapping = std::find_if(inspection.mappings.begin(), inspection.mappings.end(),
                                    [&channel](const Mapping& m) { return m.column == channel.name; });
  return mapping == inspection.mappings.end() ? "" : fmt::format("{} ({})", mapping->role, mapping->detail);
}

std::string notes(const ChannelHealth& channel, double rate_hz) {
  if (channel.missing_share == 1.0) return "no numbers";
  if (channel.constant) return "constant";
  std::vector<std::string> parts;
  if (channel.step) parts.push_back(fmt::format("in steps of {:.3g}", *channel.step));
  if (channel.update_hz < 0.8 * rate_hz)
    parts.push_back(fmt::format("changes {:.3g} times a second", channel.update_hz));
  return fmt::format("{}", fmt::join(parts, ", "));
}

/// Rows of cells as lined-up columns, the first row being the heading; text to the left, numbers to the
/// right.
void print_table(const std::vector<std::vector<std::string>>& rows, const std::string& alignment,
                 std::ostream& out) {
  std::vector<std::size_t> widths(alignment.size(), 0);
  for (const auto& row : rows) {
    for (std::size_t c = 0; c < row.size(); ++c) widths[c] = std::max(widths[c], row[c].size());
  }
  for (const auto& row : rows) {
    std::string line = " ";
    for (std::size_t c = 0; c < row.size(); ++c) {
      line += alignment[c] == '<' ? fmt::format(" {:<{}} ", row[c], widths[c])
                                  : fmt::format(" {:>{}} ", row[c], widths[c]);
    }
    out << line.substr(0, line.find_last_not_of(' ') + 1) << '\n';
  }
}

void print_time(const Inspection& inspection, std::ostream& out) {
  const TimeHealth& time = inspection.time;
  out << fmt::format("Time, column \"{}\": {:.5g} s at {:.4g} Hz. Unit {}{}, {}.\n", time.name,
                     time.duration_s, time.rate_hz, unit_word(time.unit_s),
                     inspection.unit_assumed ? " (assumed)" : "",
                     time.epoch ? "counted from 1970" : "counted from a start of its own");
  out << fmt::format(
      "  steps vary by {:.3g} ms rms; the longest is {:.4g} ms, {:.3f} s after the first stamp ({:.3g} "
      "periods)\n",
      1e3 * time.jitter_s, 1e3 * time.longest_gap_s, time.longest_gap_at_s,
      time.longest_gap_s * time.rate_hz);
  out << fmt::format("  repeated stamps: {}; backward steps: {}\n", time.duplicates, time.backward_steps);
}

void print_channels(const Inspection& inspection, std::ostream& out) {
  std::vector<std::vector<std::string>> rows{
      {"column", "mean", "std", "smallest", "largest", "missing", "at its ends",
       inspection.mappings.empty() ? "could be" : "used as", "remarks"}};
  for (const ChannelHealth& channel : inspection.channels) {
    const bool empty = channel.missing_share == 1.0;
    const auto number = [empty](double value) { return empty ? std::string("-") : significant(value); };
    rows.push_back({channel.name, number(channel.mean), number(channel.standard_deviation),
                    number(channel.minimum), number(channel.maximum), share_text(channel.missing_share),
                    share_text(channel.clipped_share), role_text(channel, inspection),
                    notes(channel, inspection.time.rate_hz)});
  }
  print_table(rows, "<>>>>>><<", out);
  out << "  (numbers as logged; \"at its ends\": share of samples that stay at the smallest or largest value "
         "for 3 samples or "
         "more)\n";
}

void print_mapping(const Inspection& inspection, std::ostream& out) {
  out << fmt::format("\nVehicle file {}\n", inspection.vehicle);
  bool all_found = true;
  for (const Mapping& mapping : inspection.mappings) {
    if (mapping.found) continue;
    all_found = false;
    out << fmt::format("  missing: \"{}\" for {}; the nearest column is \"{}\"\n", mapping.column,
                       mapping.role, mapping.nearest);
  }
  if (all_found) out << "  all columns it names are there\n";
  for (const std::string& warning : inspection.warnings) out << "  note: " << warning << '\n';
  if (!inspection.mapped) {
    out << "  this log cannot be used as it is: " << inspection.not_mapped << '\n';
    if (!inspection.not_mapped_advice.empty()) out << "    " << inspection.not_mapped_advice << '\n';
    return;
  }
  if (inspection.records.empty()) {
    out << (inspection.excitation_mapped
                ? "  no excitation found: the excitation columns are zero throughout\n"
                : "  no excitation column: only the direct estimate is possible, and feedback biases it\n");
    return;
  }
  out << fmt::format("  {} record{} found:\n", inspection.records.size(),
                     inspection.records.size() == 1 ? "" : "s");
  std::vector<std::vector<std::string>> rows{{"axis", "kind", "from, s", "to, s", "length, s"}};
  for (const FoundRecord& found : inspection.records) {
    rows.push_back({std::string(axis_name(found.record.axis)),
                    found.record.kind == RecordKind::sweep ? "sweep" : "doublet",
                    fmt::format("{:.2f}", found.from_s), fmt::format("{:.2f}", found.to_s),
                    fmt::format("{:.2f}", found.to_s - found.from_s)});
  }
  print_table(rows, "<<>>>", out);
}

void print_text(const Inspection& inspection, std::ostream& out) {
  out << fmt::format("{}: {} rows, {} columns\n\n", inspection.log, inspection.rows,
                     inspection.channels.size() + 1);
  print_time(inspection, out);
  out << '\n';
  print_channels(inspection, out);
  if (!inspection.vehicle.empty()) print_mapping(inspection, out);
}

nlohmann::ordered_json channel_json(const ChannelHealth& channel, const Inspection& inspection) {
  nlohmann::ordered_json entry{{"name", channel.name}, {"missing_share", channel.missing_share}};
  if (channel.missing_share < 1.0) {
    entry["mean"] = channel.mean;
    entry["standard_deviation"] = channel.standard_deviation;
    entry["minimum"] = channel.minimum;
    entry["maximum"] = channel.maximum;
    entry["constant"] = channel.constant;
    entry["clipped_share"] = channel.clipped_share;
    entry["update_hz"] = channel.update_hz;
  }
  if (channel.step) entry["step"] = *channel.step;
  if (inspection.mappings.empty()) {
    if (const auto guess = guess_role(channel.name)) entry["could_be"] = *guess;
  }
  return entry;
}

void print_json(const Inspection& inspection, std::ostream& out) {
  using Json = nlohmann::ordered_json;
  const TimeHealth& time = inspection.time;
  Json document{{"log", inspection.log}, {"rows", inspection.rows}};
  document["time"] = {{"name", time.name},
                      {"unit_s", time.unit_s},
                      {"unit_assumed", inspection.unit_assumed},
                      {"epoch", time.epoch},
                      {"duration_s", time.duration_s},
                      {"rate_hz", time.rate_hz},
                      {"jitter_s", time.jitter_s},
                      {"longest_gap_s", time.longest_gap_s},
                      {"longest_gap_at_s", time.longest_gap_at_s},
                      {"duplicates", time.duplicates},
                      {"backward_steps", time.backward_steps}};
  document["channels"] = Json::array();
  for (const ChannelHealth& channel : inspection.channels) {
    document["channels"].push_back(channel_json(channel, inspection));
  }
  if (!inspection.vehicle.empty()) {
    document["vehicle"] = inspection.vehicle;
    document["mapping"] = Json::array();
    for (const Mapping& mapping : inspection.mappings) {
      document["mapping"].push_back(
          {{"role", mapping.role}, {"column", mapping.column}, {"found", mapping.found}});
    }
    document["usable"] = inspection.mapped;
    if (!inspection.mapped) document["problem"] = inspection.not_mapped;
    document["warnings"] = inspection.warnings;
    document["records"] = Json::array();
    for (const FoundRecord& found : inspection.records) {
      document["records"].push_back({{"axis", axis_name(found.record.axis)},
                                     {"kind", found.record.kind == RecordKind::sweep ? "sweep" : "doublet"},
                                     {"from_s", found.from_s},
                                     {"to_s", found.to_s}});
    }
  }
  // Column names are whatever bytes the log holds; those that are not UTF-8 are replaced.
  out << document.dump(2, ' ', false, Json::error_handler_t::replace) << '\n';
}

}  // namespace

void run_inspect(const InspectOptions& options, std::ostream& out) {
  const Inspection inspection = inspect(options);
  if (options.json) {
    print_json(inspection, out);
  } else {
    print_text(inspection, out);
  }
}

}  // namespace hoverwright::ident
