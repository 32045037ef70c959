// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include <algorithm>
#include <map>
#include <set>
#include <string>

#include "ident/failure.h"
#include "ident/files.h"
#include "ident/strict_json.h"
#include "ident/vehicle/airframe_reader.h"
#include "ident/vehicle/structure_names.h"
#include "ident/vehicle/units.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::ident {
namespace {

constexpr std::string_view kFormat = "hoverwright.vehicle/1";

// Beyond these a value is in the wrong unit rather than unusual: no flight computer runs faster than 100 kHz,
// and no hovering craft flies with half a second between sensing and acting.
constexpr double kHighestSampleRateHz = 1e5;
constexpr double kLongestLatencyS = 0.5;

/// Which place of the file uses which log column, to find columns used twice.
class ColumnUse {
 public:
  void add(const std::string& column, const StrictObject& place) {
    const auto [entry, fresh] = users_.emplace(column, place.pointer("name"));
    if (!fresh) {
      place.fail("name", fmt::format("the log column \"{}\" is already used at {}", column, entry->second),
                 "Each role needs a column of its own.");
    }
  }

 private:
  std::map<std::string, std::string> users_;
};

void check_unit(const StrictObject& place, const std::string& unit, Quantity quantity,
                const std::string& role) {
  if (unit_to_si(unit, quantity)) return;
  place.fail("unit", fmt::format("the unit \"{}\" does not fit {}", unit, role),
             fmt::format("Possible: {}. Raw counts are brought to it by \"scale\".", unit_names(quantity)));
}

Channel read_channel(StrictObject section, Quantity quantity, const std::string& role, ColumnUse& columns) {
  Channel channel;
  channel.name = section.text("name");
  channel.unit = section.text("unit");
  channel.scale = section.optional_number("scale").value_or(channel.scale);
  if (channel.scale == 0.0) section.fail("scale", "must not be zero");
  section.finish();
  check_unit(section, channel.unit, quantity, role);
  columns.add(channel.name, section);
  return channel;
}

const StructureName& read_structure(StrictObject& section, Axis axis) {
  const std::string name = section.text("structure");
  std::set<std::string> fitting;
  for (const StructureName& known : kStructureNames) {
    if ((known.output == Quantity::rate) != (axis == Axis::heave)) fitting.insert(std::string(known.name));
  }
  const auto known = std::find_if(kStructureNames.begin(), kStructureNames.end(),
                                  [&name](const StructureName& candidate) { return candidate.name == name; });
  if (known != kStructureNames.end() && fitting.contains(name)) return *known;
  section.fail("structure",
               known == kStructureNames.end()
                   ? fmt::format("unknown model structure \"{}\"", name)
                   : fmt::format("the model structure \"{}\" is not one for {}", name, axis_name(axis)),
               fmt::format("The nearest one for {} is \"{}\"; known: {}.", axis_name(axis),
                           nearest_word(name, fitting), fmt::join(fitting, ", ")));
}

std::map<std::string, double> read_prior(StrictObject section) {
  std::map<std::string, double> prior;
  for (const std::string_view parameter : kParameterNames) {
    const std::string key(parameter);
    if (!section.has(key)) continue;
    // Damping may be negative (an unstable axis). Everything else is positive by its meaning.
    if (key == "damping") {
      prior[key] = section.number(key);
    } else if (key == "reaction_lead" || key == "delay") {
      prior[key] = section.non_negative(key);
    } else {
      prior[key] = section.positive(key);
    }
  }
  section.finish();
  return prior;
}

AxisSetup read_axis(StrictObject section, Axis axis, ColumnUse& columns) {
  AxisSetup setup;
  const StructureName& structure = read_structure(section, axis);
  setup.structure = std::string(structure.name);

  StrictObject channels = section.object("channels");
  if (auto excitation = channels.optional_object("excitation")) {
    setup.channels.excitation =
        read_channel(*excitation, Quantity::normalised, "an excitation, which is normalised", columns);
  }
  setup.channels.demand =
      read_channel(channels.object("demand"), Quantity::normalised, "a demand, which is normalised", columns);
  const std::string output_role = fmt::format("the {} output of {}",
                                              structure.output == Quantity::rate           ? "rate"
                                              : structure.output == Quantity::acceleration ? "acceleration"
                                                                                           : "velocity",
                                              structure.name);
  setup.channels.output = read_channel(channels.object("output"), structure.output, output_role, columns);
  channels.finish();

  if (auto prior = section.optional_object("prior")) setup.prior = read_prior(*prior);
  section.finish();
  return setup;
}

void read_axes(StrictObject section, Vehicle& vehicle, ColumnUse& columns) {
  bool any = false;
  for (const Axis axis : kAxes) {
    const std::string key(axis_name(axis));
    auto axis_section = section.optional_object(key);
    if (!axis_section) continue;
    vehicle.axes[axis_index(axis)] = read_axis(*axis_section, axis, columns);
    any = true;
  }
  section.finish();
  if (!any) section.fail("", "no axis is described", "At least one of roll, pitch, yaw, heave is needed.");
}

void check_below_half_rate(const StrictObject& section, const std::string& key, double frequency_hz,
                           double sample_rate_hz) {
  if (frequency_hz < 0.5 * sample_rate_hz) return;
  section.fail(
      key, fmt::format("{} Hz is not below half the sample rate ({} Hz)", frequency_hz, 0.5 * sample_rate_hz),
      "Leave the key out when there is no such filter.");
}

Control read_control(StrictObject section) {
  Control control;
  control.sample_rate_hz = section.positive("sample_rate_hz");
  if (control.sample_rate_hz > kHighestSampleRateHz) {
    section.fail("sample_rate_hz", fmt::format("{} Hz is beyond any flight computer", control.sample_rate_hz),
                 "It is the rate of the control loop, in Hz.");
  }
  control.latency_s = section.non_negative("latency_s");
  if (control.latency_s > kLongestLatencyS) {
    section.fail("latency_s", fmt::format("{} s from sensing to acting cannot be flown", control.latency_s),
                 "The value is in seconds: 6 ms is 0.006.");
  }
  control.gyro_filter_hz = section.optional_positive("gyro_filter_hz");
  section.finish();
  if (control.gyro_filter_hz) {
    check_below_half_rate(section, "gyro_filter_hz", *control.gyro_filter_hz, control.sample_rate_hz);
  }
  return control;
}

Limits read_limits(StrictObject section) {
  Limits limits;
  limits.tilt_deg = section.optional_positive("tilt_deg").value_or(limits.tilt_deg);
  limits.rate_deg_s = section.optional_positive("rate_deg_s").value_or(limits.rate_deg_s);
  limits.demand = section.optional_positive("demand").value_or(limits.demand);
  limits.drift_m = section.optional_positive("drift_m").value_or(limits.drift_m);
  limits.climb_m = section.optional_positive("climb_m").value_or(limits.climb_m);
  limits.endurance_s = section.optional_positive("endurance_s").value_or(limits.endurance_s);
  section.finish();
  if (limits.tilt_deg >= 90.0) {
    section.fail("tilt_deg", fmt::format("must be below 90 degrees, is {}", limits.tilt_deg));
  }
  if (limits.demand > 1.0) {
    section.fail("demand", fmt::format("must not exceed 1, is {}", limits.demand),
                 "Demands are normalised: 1 moves a motor over its whole range.");
  }
  return limits;
}

LoopGains read_loop(StrictObject section, double sample_rate_hz) {
  LoopGains gains;
  gains.kp = section.non_negative("kp");
  gains.ki = section.optional_non_negative("ki").value_or(gains.ki);
  gains.kd = section.optional_non_negative("kd").value_or(gains.kd);
  gains.derivative_cutoff_hz = section.optional_positive("derivative_cutoff_hz");
  gains.limit = section.optional_positive("limit");
  section.finish();
  if (gains.kp == 0.0 && gains.ki == 0.0 && gains.kd == 0.0) {
    section.fail("", "all gains are zero", "Leave out a loop that is not flown.");
  }
  if (gains.kd > 0.0 && !gains.derivative_cutoff_hz) {
    section.fail("derivative_cutoff_hz", "a derivative gain needs the cutoff of its low-pass",
                 "Add \"derivative_cutoff_hz\", or set kd to 0.");
  }
  if (gains.derivative_cutoff_hz) {
    check_below_half_rate(section, "derivative_cutoff_hz", *gains.derivative_cutoff_hz, sample_rate_hz);
  }
  return gains;
}

/// The loop that takes the set point this loop puts out, if it is not an axis demand.
std::optional<Loop> loop_inside(Loop loop) {
  switch (loop) {
    case Loop::roll_angle:
      return Loop::roll_rate;
    case Loop::pitch_angle:
      return Loop::pitch_rate;
    case Loop::heading:
      return Loop::yaw_rate;
    case Loop::altitude:
      return Loop::climb_rate;
    case Loop::velocity_x:
      return Loop::pitch_angle;
    case Loop::position_x:
      return Loop::velocity_x;
    case Loop::velocity_y:
      return Loop::roll_angle;
    case Loop::position_y:
      return Loop::velocity_y;
    case Loop::roll_rate:
    case Loop::pitch_rate:
    case Loop::yaw_rate:
    case Loop::climb_rate:
      break;
  }
  return std::nullopt;
}

LoopGainSet read_loops(StrictObject section, double sample_rate_hz) {
  LoopGainSet loops;
  for (const Loop loop : kLoops) {
    if (auto gains = section.optional_object(std::string(loop_name(loop)))) {
      loops[loop_index(loop)] = read_loop(*gains, sample_rate_hz);
    }
  }
  section.finish();
  for (const Loop loop : kLoops) {
    const auto inside = loop_inside(loop);
    if (!loops[loop_index(loop)] || !inside || loops[loop_index(*inside)]) continue;
    section.fail(std::string(loop_name(loop)),
                 fmt::format("this loop commands {}, which is not listed", loop_name(*inside)),
                 "List the gains of the loops from the inside out.");
  }
  return loops;
}

TimeChannel read_time(StrictObject section, ColumnUse& columns) {
  TimeChannel time{section.text("name"), section.text("unit")};
  section.finish();
  check_unit(section, time.unit, Quantity::time, "the time");
  columns.add(time.name, section);
  return time;
}

void check_format(StrictObject& file) {
  const std::string format = file.text("format");
  if (format == kFormat) return;
  file.fail("format", fmt::format("the format \"{}\" cannot be read", format),
            fmt::format("This program reads \"{}\".", kFormat));
}

}  // namespace

Vehicle parse_vehicle(std::string_view text, const std::string& source) {
  const nlohmann::json document = parse_json(text, source);
  StrictObject file(document, source, "");
  check_format(file);
  Vehicle vehicle;
  ColumnUse columns;
  vehicle.name = file.text("name");
  vehicle.time = read_time(file.object("time"), columns);
  vehicle.control = read_control(file.object("control"));
  read_axes(file.object("axes"), vehicle, columns);
  if (auto limits = file.optional_object("limits")) vehicle.limits = read_limits(*limits);
  if (auto loops = file.optional_object("loops"))
    vehicle.loops = read_loops(*loops, vehicle.control.sample_rate_hz);
  vehicle.speed_damping_1_s = file.optional_non_negative("speed_damping_1_s");
  if (auto airframe = file.optional_object("airframe")) vehicle.airframe = read_airframe(*airframe);
  file.finish();
  return vehicle;
}

Vehicle read_vehicle(const std::filesystem::path& path) {
  return parse_vehicle(read_file(path), path.string());
}

}  // namespace hoverwright::ident
