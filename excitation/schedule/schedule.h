// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <array>
#include <filesystem>
#include <map>
#include <string>
#include <string_view>
#include <variant>
#include <vector>

#include "excitation/signals/chirp.h"
#include "excitation/signals/doublet.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::excitation {

/// One excitation on one axis, with quiet trims before and after (trims are between records, not part of
/// them).
struct ScheduledRecord {
  std::string name;  ///< "roll chirp 1", for the card
  ident::Axis axis = ident::Axis::roll;
  double start_s = 0.0;  ///< from the schedule's start, a whole number of samples
  std::variant<Chirp, Doublet> signal;
  bool validation = false;  ///< never used in the fit

  [[nodiscard]] double duration_s() const;
  [[nodiscard]] double amplitude() const;
  [[nodiscard]] double value(double t_from_schedule_start_s) const;
};

/// Planning options; these initialisers are the defaults of `hoverwright schedule` and of its --help.
struct ScheduleOptions {
  double low_hz = 0.3;     ///< lowest frequency; 4 cycles must fit in a record (common practice: 4-5)
  double high_hz = 20.0;   ///< highest frequency, below 0.4 of the loop rate
  double record_s = 45.0;  ///< one chirp: one cycle held at low_hz, sweep and fades together
  int repeats = 2;         ///< chirps per axis, >= 1 (common practice: two, plus a validation record)
  double trim_s = 3.0;     ///< quiet before and quiet after every record, >= 0.5 (common practice: 3)
  double fade_s = 1.0;     ///< each fade of a chirp
  double doublet_s = 0.8;  ///< length of one doublet, >= 0.25; two are flown. Short ones keep the lean small
  double demand_share = 0.3;  ///< yaw and heave amplitude as a share of limits.demand, where none is given
  double lean_share = 0.175;  ///< the same for roll and pitch, whose slow end leans and moves the vehicle
  std::map<ident::Axis, double> amplitude;  ///< peak demand per axis, overrides the shares
  double reserve_s = 120.0;                 ///< for take-off, return and landing, counted against endurance
};

struct Schedule {
  std::string vehicle_name;
  double sample_rate_hz = 0.0;
  double duration_s = 0.0;  ///< from the first trim to the last
  double reserve_s = 0.0;
  double endurance_s = 0.0;
  double trim_s = 0.0;
  std::vector<ScheduledRecord> records;  ///< in time order, not overlapping
  std::vector<std::string> cautions;     ///< things the pilot must know, e.g. amplitudes not sized by a model

  /// Excitation of the four axes at t seconds from the schedule's start.
  [[nodiscard]] Eigen::Vector4d value(double t_s) const;
};

/// Roll, pitch, yaw, heave in this order, those that have an excitation channel: `repeats` exponential
/// chirps, then two doublets for validation, each with its own trim before and after (so twice trim_s lies
/// between records). Records start on samples of the control loop; a doublet is lengthened to an even number
/// of samples so that its halves cancel. Amplitudes are not predicted to respect the vehicle's limits: a
/// caution says so.
/// @throws Failure (bad_input): bad options (`where` is the option of `hoverwright schedule`, "--low"); an
/// amplitude beyond limits.demand; no axis with an excitation channel; flight time plus reserve beyond
/// limits.endurance_s (by how much, and which options shorten it).
Schedule plan_schedule(const ident::Vehicle& vehicle, const ScheduleOptions& options);

/// schedule.json text. `vehicle_sha256` goes into the provenance block as the input "vehicle.json".
std::string schedule_to_json(const Schedule& schedule, const ScheduleOptions& options,
                             const std::string& vehicle_sha256);

/// Reads schedule.json back; every number returns exactly. Provenance is checked for form and not returned.
/// @throws Failure (bad_input) with file and JSON pointer: unknown or missing keys, wrong types, impossible
/// signals, records out of order, overlapping or outside the schedule.
Schedule read_schedule(const std::filesystem::path& path);

/// Same from text; `source` names it in messages.
Schedule parse_schedule(std::string_view text, const std::string& source);

/// Playback at the loop rate: header `time_s,roll,pitch,yaw,heave`, one row per sample from 0 to duration_s,
/// fixed 9 decimals.
std::string playback_csv(const Schedule& schedule);

}  // namespace hoverwright::excitation
