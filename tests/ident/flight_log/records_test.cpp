// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/records.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>
#include <random>

using namespace hoverwright::ident;
using Eigen::Index;
using Eigen::VectorXd;

namespace {

constexpr double kRate = 200.0;

FlightData quiet_flight(double seconds) {
  FlightData data;
  data.sample_rate_hz = kRate;
  data.samples = static_cast<Index>(seconds * kRate);
  for (auto& axis : data.axes) {
    axis.emplace();
    axis->excitation = axis->demand = axis->output = VectorXd::Zero(data.samples);
  }
  return data;
}

VectorXd& excitation(FlightData& data, Axis axis) {
  return data.axes[axis_index(axis)]->excitation;
}

Index at(double seconds) {
  return static_cast<Index>(std::lround(seconds * kRate));
}

/// Exponential chirp 0.3 to 12 Hz with raised-cosine fades of 1 s, rounded as a log with six decimals would.
void add_chirp(FlightData& data, Axis axis, double from_s, double length_s, double amplitude) {
  const double ratio = std::log(12.0 / 0.3);
  for (Index i = 0; i < at(length_s); ++i) {
    const double t = static_cast<double>(i) / kRate;
    const double phase =
        2.0 * std::numbers::pi * 0.3 * length_s / ratio * (std::exp(ratio * t / length_s) - 1.0);
    const double edge = std::min({1.0, t, length_s - t});
    const double fade = 0.5 - 0.5 * std::cos(std::numbers::pi * edge);
    excitation(data, axis)[at(from_s) + i] = std::round(1e6 * amplitude * fade * std::sin(phase)) * 1e-6;
  }
}

void add_doublet(FlightData& data, Axis axis, double from_s, double pulse_s, double amplitude) {
  excitation(data, axis).segment(at(from_s), at(pulse_s)).setConstant(amplitude);
  excitation(data, axis).segment(at(from_s + pulse_s), at(pulse_s)).setConstant(-amplitude);
}

}  // namespace

TEST_CASE("records: a flight of chirps and doublets is taken apart") {
  FlightData data = quiet_flight(100.0);
  add_chirp(data, Axis::roll, 5.0, 30.0, 0.1);
  add_doublet(data, Axis::roll, 38.0, 0.5, 0.05);
  add_chirp(data, Axis::heave, 50.0, 30.0, 0.02);
  add_doublet(data, Axis::heave, 90.0, 1.0, 0.01);
  const auto records = find_records(data);
  REQUIRE(records.size() == 4);
  CHECK(records[0].axis == Axis::roll);
  CHECK(records[0].kind == RecordKind::sweep);
  // The fade leaves less than 1e-6 of the largest value for a few samples at each end.
  CHECK(std::abs(records[0].first - at(5.0)) <= 6);
  CHECK(std::abs(records[0].last - at(35.0)) <= 6);
  CHECK(records[1].axis == Axis::roll);
  CHECK(records[1].kind == RecordKind::doublet);
  CHECK(records[1].first == at(38.0));
  CHECK(records[1].last == at(39.0));
  CHECK(records[2].axis == Axis::heave);
  CHECK(records[2].kind == RecordKind::sweep);
  CHECK(records[3].kind == RecordKind::doublet);
  CHECK(records[3].last == at(92.0));

  SECTION("trims reach at most 3 s and half way to the neighbours") {
    CHECK(records[0].span_first == records[0].first - at(3.0));
    CHECK(std::abs(records[0].span_last - at(36.5)) <= 4);
    CHECK(records[1].span_first == records[0].span_last);
    CHECK(records[1].span_last == at(42.0));
    CHECK(records[3].span_last == at(95.0));
    for (std::size_t i = 0; i < records.size(); ++i) {
      CHECK(records[i].span_first <= records[i].first);
      CHECK(records[i].span_last >= records[i].last);
      if (i > 0) CHECK(records[i].span_first >= records[i - 1].span_last);
    }
  }
}

TEST_CASE("records: spans stay inside the log") {
  FlightData data = quiet_flight(31.0);
  add_chirp(data, Axis::yaw, 0.5, 30.0, 0.1);
  const auto records = find_records(data);
  REQUIRE(records.size() == 1);
  CHECK(records[0].span_first == 0);
  CHECK(records[0].span_last == data.samples);
}

TEST_CASE("records: no excitation, no record") {
  FlightData data = quiet_flight(20.0);
  CHECK(find_records(data).empty());
  for (auto& axis : data.axes) axis->excitation.resize(0);
  CHECK(find_records(data).empty());
  data.axes = {};
  CHECK(find_records(data).empty());
}

TEST_CASE("records: blips are no record, short pauses do not split one") {
  FlightData data = quiet_flight(60.0);
  add_chirp(data, Axis::pitch, 5.0, 20.0, 0.1);
  excitation(data, Axis::pitch).segment(at(15.0), at(0.4)).setZero();
  excitation(data, Axis::pitch).segment(at(50.0), at(0.2)).setConstant(0.05);
  const auto records = find_records(data);
  REQUIRE(records.size() == 1);
  CHECK(records[0].last - records[0].first > at(19.0));
}

TEST_CASE("records: residue on an unused channel takes nothing away and makes no record") {
  FlightData data = quiet_flight(80.0);
  add_chirp(data, Axis::roll, 5.0, 30.0, 0.1);
  add_chirp(data, Axis::pitch, 45.0, 30.0, 0.1);
  const auto clean = find_records(data);
  std::mt19937 random(2);
  std::normal_distribution<double> noise(0.0, 0.1 * 3e-5);  // share of the largest value
  for (double& value : excitation(data, Axis::pitch)) value += noise(random);
  const auto noisy = find_records(data);
  REQUIRE(noisy.size() == 2);
  CHECK(noisy[0].axis == Axis::roll);
  CHECK(noisy[1].axis == Axis::pitch);
  CHECK(noisy[0].first == clean[0].first);
  CHECK(noisy[0].last == clean[0].last);
  // With the noise the fade counts from where it rises above it: at most the energy window earlier or later.
  CHECK(std::abs(noisy[1].first - clean[1].first) <= at(0.25));
  CHECK(std::abs(noisy[1].last - clean[1].last) <= at(0.25));
}

TEST_CASE("records: a weak copy on another axis is the stronger axis's record") {
  FlightData data = quiet_flight(80.0);
  add_chirp(data, Axis::yaw, 5.0, 30.0, 0.1);
  add_chirp(data, Axis::roll, 45.0, 30.0, 0.1);
  excitation(data, Axis::roll) += 0.05 * excitation(data, Axis::yaw);
  const auto records = find_records(data);
  REQUIRE(records.size() == 2);
  CHECK(records[0].axis == Axis::yaw);
  CHECK(records[1].axis == Axis::roll);
}

TEST_CASE("records: a sweep that a slower computer plays back is no doublet, a doublet with ramps is one") {
  FlightData data = quiet_flight(60.0);
  add_chirp(data, Axis::roll, 5.0, 30.0, 0.1);
  VectorXd& r = excitation(data, Axis::roll);
  for (Index i = 0; i < r.size(); ++i) r[i] = r[i - i % 4];  // held at 50 Hz
  add_doublet(data, Axis::roll, 45.0, 0.5, 0.05);
  for (Index i = 0; i < 5; ++i) r[at(45.0) + i] = 0.01 * static_cast<double>(i);
  const auto records = find_records(data);
  REQUIRE(records.size() == 2);
  CHECK(records[0].kind == RecordKind::sweep);
  CHECK(records[1].kind == RecordKind::doublet);
}
