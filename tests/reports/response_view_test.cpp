// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/response_view.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <numbers>

#include "reports/report_plots.h"
#include "tests/reports/sample_study.h"

using namespace hoverwright;
using namespace hoverwright::reports;

namespace {

/// exp(-2π j f delay) on a grid, each point with relative noise `relative`.
ident::FrequencyResponse delay_response(double delay_s, double relative) {
  ident::FrequencyResponse response;
  const Eigen::Index points = 60;
  response.frequency_hz = Eigen::VectorXd::LinSpaced(points, 0.5, 30.0);
  response.a.resize(points);
  response.b = Eigen::VectorXcd::Ones(points);
  response.noise.assign(static_cast<std::size_t>(points), {relative * relative, 0.0, 0.0});
  response.degrees_of_freedom = Eigen::VectorXd::Constant(points, 30.0);
  for (Eigen::Index k = 0; k < points; ++k) {
    response.a(k) = std::polar(1.0, -2.0 * std::numbers::pi * response.frequency_hz(k) * delay_s);
  }
  return response;
}

}  // namespace

TEST_CASE("response view: phase of a delay is unwrapped to a straight line") {
  const ResponseView view = view_response(delay_response(0.05, 0.05));
  for (Eigen::Index k = 0; k < view.phase_deg.size(); ++k) {
    const double expected = -360.0 * 0.05 * (0.5 + 0.5 * static_cast<double>(k));
    // Rounding only: angles up to 540° from sums of a few terms, 1e-9° leaves four digits of room.
    CHECK(view.phase_deg(k) == Approx(expected).margin(1e-9));
  }
}

TEST_CASE("response view: a point whose phase is not known does not carry the branch away") {
  ident::FrequencyResponse response = delay_response(0.05, 0.05);
  for (const Eigen::Index k : {0, 20, 21, 22}) {
    response.a(k) = std::polar(1.0, 2.9);  // far off the line
    response.noise[static_cast<std::size_t>(k)].aa = 4.0;
  }
  const ResponseView view = view_response(response);
  CHECK_FALSE(view.limits[20].trusted());
  CHECK(view.phase_deg(59) == Approx(-540.0).margin(1e-9));
  CHECK(std::abs(view.phase_deg(20) - view.phase_deg(19)) <= 180.0);
}

TEST_CASE("response view: limits hold the estimate; where the demand is lost in noise there are none") {
  ident::FrequencyResponse response = delay_response(0.01, 0.05);
  response.noise[7].bb = 1.0;  // b = 1 with unit variance: the region of a/b is unbounded
  const ResponseView view = view_response(response);
  CHECK_FALSE(view.limits[7].bounded);
  CHECK_FALSE(gain_half_width_db(view, 7).has_value());
  REQUIRE(view.limits[8].trusted());
  CHECK(*view.limits[8].gain_low_db < view.gain_db(8));
  CHECK(*view.limits[8].gain_high_db > view.gain_db(8));
  // F(2, 60) at 95 % is 3.15 (tables), so the disc has radius sqrt(3.15) 0.05 = 0.0888 about 1: 20
  // log10 1.0888 = 0.739 dB.
  CHECK(*view.limits[8].gain_high_db == Approx(0.739).margin(0.002));
}

TEST_CASE("response view: bands by running median ignore one wild line and stop where the data stop") {
  ident::FrequencyResponse response = delay_response(0.01, 0.05);
  response.noise[20].aa = 100.0;
  for (std::size_t k = 40; k < 60; ++k) response.noise[k].aa = 100.0;
  const auto band = band_known_within(view_response(response), response.frequency_hz, 3.0);
  REQUIRE(band.has_value());
  CHECK(band->low_hz == 0.5);
  // Line 40 lies at 20.5 Hz; the median over nine lines turns within four lines of it.
  CHECK(band->high_hz == Approx(20.0).margin(0.5));
  CHECK_FALSE(band_known_within(view_response(response), response.frequency_hz, 0.1).has_value());
}

TEST_CASE("report plots: drawn points are spread over log frequency, from the first on") {
  const Eigen::VectorXd frequency = Eigen::VectorXd::LinSpaced(500, 0.3, 25.0);
  const std::vector<Eigen::Index> drawn = drawn_points(frequency);
  CHECK(drawn.front() == 0);
  CHECK(frequency(drawn.back()) >
        25.0 / std::exp2(1.0 / 16.0) - 0.05);  // no gap at the end but the spacing and one line
  CHECK(drawn.size() < 120);  // 6.4 octaves of 16 points, fewer where lines are further apart than that
  for (std::size_t i = 1; i < drawn.size(); ++i)
    CHECK(frequency(drawn[i]) / frequency(drawn[i - 1]) >= std::exp2(1.0 / 16.0) * (1.0 - 1e-12));
  CHECK(drawn_points(Eigen::VectorXd()).empty());
}

TEST_CASE("report plots: the model line lies on the measured points' branch") {
  IdentifyResult result = tests::sample_identify();
  AxisResult& roll = result.axes.at(ident::Axis::roll);
  const ResponseView view = view_response(roll.response);
  ResponseView turned = view;
  turned.phase_deg.array() -= 720.0;
  const ident::ResponseBand plain = drawn_band(roll, view);
  const ident::ResponseBand moved = drawn_band(roll, turned);
  // A shift by two turns rounds at the last digit of angles below 1000°.
  CHECK((plain.phase_deg - moved.phase_deg).isApproxToConstant(720.0, 1e-12));
}
