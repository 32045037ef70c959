// SPDX-License-Identifier: GPL-3.0-or-later
#include <catch2/catch.hpp>
#include <cmath>
#include <limits>
#include <string>

#include "excitation/schedule/schedule.h"
#include "ident/failure.h"
#include "tests/excitation/schedule/plain_vehicle.h"

namespace hoverwright::excitation {
namespace {

using Catch::Contains;
using ident::Axis;
using tests::plain_vehicle;

/// The Failure of planning with these options.
ident::Failure refusal(const ScheduleOptions& options, const ident::Vehicle& vehicle = plain_vehicle()) {
  try {
    plan_schedule(vehicle, options);
  } catch (const ident::Failure& failure) {
    return failure;
  }
  throw std::runtime_error("was not refused");
}

void require_refused(const ScheduleOptions& options, const std::string& where, const std::string& problem,
                     const std::string& advice = "") {
  const ident::Failure failure = refusal(options);
  CHECK(failure.kind() == ident::FailureKind::bad_input);
  CHECK(failure.where() == where);
  CHECK_THAT(failure.problem(), Contains(problem));
  CHECK_THAT(failure.advice(), Contains(advice));
}

template <typename Value>
ScheduleOptions with(Value ScheduleOptions::*member, Value value) {
  ScheduleOptions options;
  options.*member = value;
  return options;
}

}  // namespace

TEST_CASE("plan: one axis after another, chirps then two validation doublets") {
  const Schedule schedule = plan_schedule(plain_vehicle(), {});
  REQUIRE(schedule.records.size() == 16);
  for (std::size_t k = 0; k < 16; ++k) {
    const ScheduledRecord& record = schedule.records[k];
    CHECK(record.axis == ident::kAxes[k / 4]);
    CHECK(record.validation == (k % 4 >= 2));
    CHECK(std::holds_alternative<Doublet>(record.signal) == record.validation);
  }
  CHECK(schedule.records[1].name == "roll chirp 2");
  CHECK(schedule.records[14].name == "heave doublet 1");
  CHECK(schedule.vehicle_name == "Plover");
  CHECK(schedule.sample_rate_hz == 400.0);
}

TEST_CASE("plan: only axes with an excitation channel fly, the others are named") {
  ident::Vehicle vehicle = plain_vehicle();
  vehicle.axes[ident::axis_index(Axis::roll)].reset();
  vehicle.axes[ident::axis_index(Axis::yaw)]->channels.excitation.reset();
  const Schedule schedule = plan_schedule(vehicle, {});
  REQUIRE(schedule.records.size() == 8);
  CHECK(schedule.records[0].axis == Axis::pitch);
  CHECK(schedule.records[7].axis == Axis::heave);
  REQUIRE(schedule.cautions.size() == 2);
  CHECK_THAT(schedule.cautions[1], Contains("yaw") && !Contains("roll"));
  for (auto& axis : vehicle.axes) {
    if (axis) axis->channels.excitation.reset();
  }
  CHECK_THAT(refusal({}, vehicle).problem(), Contains("no axis of the vehicle has an excitation channel"));
}

TEST_CASE(
    "plan: every record has its own trim before and after, starts on a sample, and fits in the schedule") {
  ScheduleOptions options;
  options.trim_s = 2.7183;
  options.record_s = 31.4159;
  options.doublet_s = 0.7771;
  const Schedule schedule = plan_schedule(plain_vehicle(), options);
  double quiet_from_s = -options.trim_s;  // the first record needs only its own trim
  for (const ScheduledRecord& record : schedule.records) {
    const double quiet_s = record.start_s - quiet_from_s;
    // At least two trims; at most two samples more, for the rounding up of this start and of the end before
    // it.
    CHECK(quiet_s >= 2.0 * options.trim_s - 1e-9);
    CHECK(quiet_s <= 2.0 * options.trim_s + 2.0 / 400.0 + 1e-9);
    const double sample = record.start_s * 400.0;
    CHECK(std::abs(sample - std::round(sample)) < 1e-9);
    quiet_from_s = record.start_s + record.duration_s();
  }
  CHECK(schedule.duration_s >= quiet_from_s + options.trim_s - 1e-9);
  CHECK(schedule.duration_s <= quiet_from_s + options.trim_s + 1.0 / 400.0 + 1e-9);
}

TEST_CASE("plan: defaults take 8 chirps of 45 s, 8 doublets of 0.8 s and 32 trims of 3 s") {
  const Schedule schedule = plan_schedule(plain_vehicle(), {});
  CHECK(schedule.duration_s == Approx(8 * 45.0 + 8 * 0.8 + 32 * 3.0).epsilon(1e-12));
  CHECK(schedule.reserve_s == 120.0);
  CHECK(schedule.endurance_s == 720.0);
}

TEST_CASE("plan: in flight only the record's own axis moves, and doublets leave no net impulse") {
  ScheduleOptions options;
  options.doublet_s = 0.7771;  // not an even number of samples
  const Schedule schedule = plan_schedule(plain_vehicle(), options);
  const auto samples = std::lround(schedule.duration_s * 400.0);
  std::size_t next = 0;
  Eigen::Vector4d doublet_sum = Eigen::Vector4d::Zero();
  long moving = 0;
  for (long k = 0; k <= samples; ++k) {
    const double t_s = static_cast<double>(k) / 400.0;
    while (next < schedule.records.size() &&
           t_s > schedule.records[next].start_s + schedule.records[next].duration_s() + 1e-6) {
      ++next;
    }
    const Eigen::Vector4d value = schedule.value(t_s);
    if (value.isZero(0.0)) continue;
    ++moving;
    REQUIRE(next < schedule.records.size());
    const ScheduledRecord& record = schedule.records[next];
    REQUIRE(t_s >= record.start_s - 1e-6);
    const auto axis = static_cast<Eigen::Index>(ident::axis_index(record.axis));
    REQUIRE(std::abs(value[axis]) <= record.amplitude());
    REQUIRE(value.cwiseAbs().sum() == std::abs(value[axis]));
    if (record.validation) doublet_sum += value;
  }
  // Sums of equal numbers of +a and -a: whatever is left is rounding of sums below 0.06·156.
  CHECK(doublet_sum.cwiseAbs().maxCoeff() < 1e-12);
  CHECK(moving > 8 * 44 * 400);
}

TEST_CASE("plan: amplitudes come from the shares of the demand limit or are given, never beyond the limit") {
  ScheduleOptions options;
  options.amplitude[Axis::yaw] = 0.11;
  const Schedule schedule = plan_schedule(plain_vehicle(), options);
  for (const ScheduledRecord& record : schedule.records) {
    const double expected = record.axis == Axis::yaw     ? 0.11
                            : record.axis == Axis::heave ? 0.3 * 0.2
                                                         : 0.175 * 0.2;
    CHECK(record.amplitude() == Approx(expected).epsilon(1e-14));
  }
  options.amplitude[Axis::yaw] = 0.2;
  CHECK_NOTHROW(plan_schedule(plain_vehicle(), options));
  options.amplitude[Axis::yaw] = 0.2001;
  require_refused(options, "--amplitude yaw", "0.2001 is beyond the demand limit of 0.2");
  options.amplitude[Axis::yaw] = 0.0;
  require_refused(options, "--amplitude yaw", "not a positive demand");

  ident::Vehicle vehicle = plain_vehicle();
  vehicle.axes[ident::axis_index(Axis::yaw)]->channels.excitation.reset();
  options.amplitude[Axis::yaw] = 0.1;
  CHECK_THAT(refusal(options, vehicle).problem(), Contains("no excitation channel"));
}

TEST_CASE("plan: amplitudes that no simulation sized bring the caution to rehearse first") {
  const Schedule schedule = plan_schedule(plain_vehicle(), {});
  REQUIRE(schedule.cautions.size() == 1);
  CHECK_THAT(schedule.cautions[0], Contains("no simulation has sized them") && Contains("Rehearse"));
}

TEST_CASE("plan: impossible options are refused by name, with advice") {
  const double nan = std::numeric_limits<double>::quiet_NaN();
  // 0.08 Hz · 45 s = 3.6 cycles; 4 / 0.08 = 50 s; 4 / 45 s = 0.0889 Hz.
  require_refused(with(&ScheduleOptions::low_hz, 0.08), "--low", "3.6 cycles", "--record at least 50 s");
  require_refused(with(&ScheduleOptions::low_hz, 0.08), "--low", "3.6 cycles", "--low at least 0.0889 Hz");
  require_refused(with(&ScheduleOptions::low_hz, 0.0), "--low", "not a positive frequency");
  require_refused(with(&ScheduleOptions::low_hz, nan), "--low", "not a positive frequency");
  require_refused(with(&ScheduleOptions::high_hz, 160.0), "--high", "not below 0.4 of the loop rate, 160 Hz");
  require_refused(with(&ScheduleOptions::high_hz, 0.3), "--high", "not above the lowest");
  require_refused(with(&ScheduleOptions::record_s, -45.0), "--record", "not a positive time");
  require_refused(with(&ScheduleOptions::repeats, 0), "--repeats", "one is the least");
  require_refused(with(&ScheduleOptions::trim_s, 0.4), "--trim", "0.5 s is the least");
  require_refused(with(&ScheduleOptions::doublet_s, 0.2), "--doublet", "0.25 s is the least");
  require_refused(with(&ScheduleOptions::fade_s, -1.0), "--fade", "0 s is the least");
  require_refused(with(&ScheduleOptions::fade_s, 21.0), "--fade", "leave nothing of a record of 45 s");
  require_refused(with(&ScheduleOptions::reserve_s, nan), "--reserve", "0 s is the least");
  require_refused(with(&ScheduleOptions::demand_share, 1.01), "--demand-share", "not a share");
  require_refused(with(&ScheduleOptions::lean_share, 0.0), "--lean-share", "not a share");
  CHECK_NOTHROW(plan_schedule(plain_vehicle(), with(&ScheduleOptions::high_hz, 159.9)));
  CHECK_NOTHROW(plan_schedule(plain_vehicle(), with(&ScheduleOptions::low_hz, 4.0 / 45.0 + 1e-9)));
}

TEST_CASE("plan: a flight beyond the battery is refused with the excess and a record length that fits") {
  ident::Vehicle vehicle = plain_vehicle();
  vehicle.limits.endurance_s = 500.0;
  // 462.4 s of schedule and 120 s of reserve: 82.4 s too many, over 8 chirps 10.3 s each.
  const ident::Failure failure = refusal({}, vehicle);
  CHECK(failure.kind() == ident::FailureKind::bad_input);
  CHECK_THAT(failure.problem(), Contains("462 s") && Contains("120 s of reserve") && Contains("83 s more"));
  CHECK_THAT(failure.problem(), Contains("limits.endurance_s"));
  CHECK_THAT(failure.advice(), Contains("Records of 34.7 s would fit (--record)"));
  CHECK_NOTHROW(plan_schedule(vehicle, with(&ScheduleOptions::record_s, 34.7)));
  CHECK_THROWS_AS(plan_schedule(vehicle, with(&ScheduleOptions::record_s, 34.8)), ident::Failure);
  vehicle.limits.endurance_s = 200.0;
  CHECK_THAT(refusal({}, vehicle).advice(), Contains("two batteries"));
}

}  // namespace hoverwright::excitation
