// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/flight_card.h"

#include <catch2/catch.hpp>
#include <string>

#include "ident/files.h"
#include "tests/excitation/schedule/plain_vehicle.h"
#include "tests/run_script.h"

namespace hoverwright::reports {
namespace {

using Catch::Contains;

std::size_t count(const std::string& text, const std::string& part) {
  std::size_t found = 0;
  for (std::size_t at = text.find(part); at != std::string::npos; at = text.find(part, at + part.size()))
    ++found;
  return found;
}

ident::Vehicle vehicle_with_limits() {
  ident::Vehicle vehicle = tests::plain_vehicle();
  vehicle.limits = {25.0, 140.0, 0.2, 4.5, 2.5, 720.0};
  return vehicle;
}

std::string card(const ident::Vehicle& vehicle, const excitation::ScheduleOptions& options = {}) {
  return flight_card_html(excitation::plan_schedule(vehicle, options), vehicle);
}

}  // namespace

TEST_CASE("flight card: every record stands there with start, length and peak, in order") {
  excitation::ScheduleOptions options;
  options.amplitude[ident::Axis::yaw] = 0.15;
  const ident::Vehicle vehicle = vehicle_with_limits();
  const excitation::Schedule schedule = excitation::plan_schedule(vehicle, options);
  const std::string html = flight_card_html(schedule, vehicle);
  std::size_t at = 0;
  for (const excitation::ScheduledRecord& record : schedule.records) {
    at = html.find(">" + record.name + "<", at);
    INFO(record.name);
    REQUIRE(at != std::string::npos);
  }
  CHECK_THAT(html, Contains("<strong>0:03.0</strong></td><td class=\"w\">roll chirp 1<"));
  // 2 chirps of 45 s, 2 doublets of 0.8 s and 8 trims of 3 s for roll, then pitch's own trim.
  CHECK_THAT(html, Contains("<strong>1:58.6</strong></td><td class=\"w\">pitch chirp 1<"));
  CHECK_THAT(html, Contains("0.15 (75 %)"));
  CHECK_THAT(html, Contains("0.035 (17 %)"));
  CHECK(count(html, "0.3–20 Hz") == 8);
}

TEST_CASE("flight card: abort limits stand at the top and beside every axis") {
  const std::string html = card(vehicle_with_limits());
  CHECK_THAT(html, Contains("<dd>25°</dd>") && Contains("<dd>140°/s</dd>") && Contains("<dd>4.5 m</dd>") &&
                       Contains("<dd>2.5 m</dd>"));
  for (const std::string limit : {"tilt 25°", "rate 140°/s", "drift 4.5&nbsp;m", "climb ±2.5&nbsp;m"}) {
    CHECK(count(html, limit) == 4);
  }
}

TEST_CASE("flight card: the battery adds up") {
  // 462.4 s of schedule and 120 s of reserve out of 720 s leave 137.6 s; what is used rounds up, what is left
  // down.
  const std::string html = card(vehicle_with_limits());
  CHECK_THAT(html, Contains("<strong>7&nbsp;min&nbsp;43&nbsp;s</strong>"));
  CHECK_THAT(
      html,
      Contains(
          "<strong>2&nbsp;min&nbsp;00&nbsp;s</strong> (hatched) = 9&nbsp;min&nbsp;43&nbsp;s of the battery's "
          "12&nbsp;min&nbsp;00&nbsp;s, 2&nbsp;min&nbsp;17&nbsp;s to spare"));
  const ident::Vehicle vehicle = vehicle_with_limits();
  excitation::Schedule schedule = excitation::plan_schedule(vehicle, {});
  schedule.endurance_s = 500.0;  // a schedule file that was changed by hand
  CHECK_THAT(flight_card_html(schedule, vehicle),
             Contains("1&nbsp;min&nbsp;23&nbsp;s too much: do not fly this"));
}

TEST_CASE("flight card: cautions and preparation") {
  const std::string html = card(vehicle_with_limits());
  for (const std::string words :
       {"can upset", "safety pilot", "can abort", "clear of people", "local rules", "maker's limits",
        "in steps", "Nothing here replaces licensed practice or airworthiness approval",
        "no simulation has sized them", "Abort switch tried", "Gusts add",
        "excite_roll, demand_roll, output_roll"}) {
    CHECK_THAT(html, Contains(words));
  }
  CHECK_THAT(html, !Contains("The rehearsal assumes"));
  ident::Vehicle vehicle = vehicle_with_limits();
  vehicle.airframe.emplace();
  vehicle.airframe->weather.wind_m_s = 5.0;
  vehicle.airframe->weather.turbulence_wind_m_s = 7.0;
  CHECK_THAT(card(vehicle), Contains("a wind of 5 m/s with the turbulence of 7 m/s"));
}

TEST_CASE("flight card: names from files cannot become markup") {
  ident::Vehicle vehicle = vehicle_with_limits();
  vehicle.name = "<script>alert(1)</script> & \"Co\" 'x'";
  vehicle.time.name = "<b>";
  vehicle.axes[0]->channels.demand.name = "<i>d</i>";
  excitation::Schedule schedule = excitation::plan_schedule(vehicle, {});
  schedule.records[0].name = "<u>r</u>";
  schedule.cautions.emplace_back("<img src=x>");
  const std::string html = flight_card_html(schedule, vehicle);
  CHECK_THAT(html, Contains("&lt;script&gt;alert(1)&lt;/script&gt; &amp; &quot;Co&quot; &#39;x&#39;"));
  for (const std::string markup : {"<script", "<b>", "<i>", "<u>", "<img"}) CHECK(count(html, markup) == 0);
  CHECK_THAT(
      html, Contains("&lt;b&gt;") && Contains("&lt;i&gt;d") && Contains("&lt;u&gt;r") && Contains("&lt;img"));
}

TEST_CASE("flight card: needs nothing from outside the file") {
  const std::string html = card(vehicle_with_limits());
  for (const std::string word : {"http:", "https:", "src=", "href=", "@import", "<link", "<script"}) {
    CHECK(count(html, word) == 0);
  }
  CHECK(count(html, "url(") == count(html, "url(#"));
}

TEST_CASE("flight card: Chromium prints the default schedule of four axes on one A4 page", "[external]") {
  ident::Vehicle vehicle = vehicle_with_limits();
  vehicle.airframe.emplace();
  const tests::TemporaryFolder folder;
  const std::string base = folder.path().string();
  ident::write_file(folder.path() / "card.html", card(vehicle));
  const tests::ScriptResult printed = tests::run_script(
      "timeout 120 chromium --headless --no-sandbox --disable-gpu --no-first-run "
      "--disable-background-networking "
      "--disable-component-update --disable-sync --user-data-dir=" +
      base + "/profile --no-pdf-header-footer --print-to-pdf=" + base + "/card.pdf file://" + base +
      "/card.html");
  INFO(printed.output);
  REQUIRE(printed.exit_code == 0);
  const std::string pdf = ident::read_file(folder.path() / "card.pdf");
  CHECK(count(pdf, "/Type /Pages") == 1);
  CHECK(count(pdf, "/Type /Page\n") + count(pdf, "/Type /Page ") == 1);
  // A4 is 210 mm × 297 mm = 595.3 × 841.9 points.
  const bool a4 = count(pdf, "/MediaBox [0 0 595") + count(pdf, "/MediaBox [0 0 594") == 1;
  CHECK(a4);
}

}  // namespace hoverwright::reports
