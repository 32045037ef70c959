// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/report_page.h"

#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <nlohmann/json.hpp>

#include "reports/page_assets.h"
#include "reports/report_plots.h"
#include "reports/report_sections.h"
#include "reports/report_sentences.h"
#include "tests/reports/sample_study.h"

using namespace hoverwright;
using namespace hoverwright::reports;
using Catch::Contains;
using tests::sample_gains;
using tests::sample_identify;
using tests::sample_provenance;

namespace {

std::size_t count(const std::string& text, const std::string& word) {
  std::size_t found = 0;
  for (std::size_t at = text.find(word); at != std::string::npos; at = text.find(word, at + word.size()))
    ++found;
  return found;
}

/// The page without script, style, data and licence: what a reader sees.
std::string visible(const std::string& page) {
  const std::size_t from = page.find("<body>");
  const std::size_t to = page.find("<footer>");
  REQUIRE(from != std::string::npos);
  REQUIRE(to != std::string::npos);
  return page.substr(from, to - from);
}

std::string page_of(const IdentifyResult& identified, const std::optional<GainsResult>& gains) {
  return report_html(identified, gains, sample_provenance());
}

}  // namespace

TEST_CASE("report page: warnings come before everything else the flight gave") {
  const std::string page = visible(page_of(sample_identify(), sample_gains()));
  const std::size_t warnings = page.find("id=\"warnings\"");
  const std::size_t summary = page.find("id=\"summary\"");
  const std::size_t cautions = page.find("id=\"cautions\"");
  const std::size_t roll = page.find("id=\"roll\"");
  const std::size_t gains = page.find("id=\"gains\"");
  const std::size_t bring_up = page.find("id=\"bring-up\"");
  CHECK(warnings < summary);
  CHECK(summary < cautions);
  CHECK(cautions < roll);
  CHECK(roll < gains);
  CHECK(gains < bring_up);
  CHECK(bring_up != std::string::npos);
}

TEST_CASE("report page: self-contained, with data as JSON that parses and uPlot's licence") {
  const std::string page = page_of(sample_identify(), sample_gains());
  for (const char* reference : {"src=", "@import", "url(http", "<link", "<iframe"}) {
    INFO(reference);
    CHECK(page.find(reference) == std::string::npos);
  }
  CHECK(uplot_script().find("</script") == std::string_view::npos);
  CHECK(page_script().find("</script") == std::string_view::npos);
  CHECK_THAT(page, Contains("Permission is hereby granted, free of charge"));
  const std::string open = "id=\"plot-data\">";
  const std::size_t from = page.find(open) + open.size();
  const nlohmann::json data = nlohmann::json::parse(page.substr(from, page.find("</script>", from) - from));
  CHECK(data.size() == 4);
  CHECK(data.at("roll").at("points").at("f").size() == data.at("roll").at("points").at("gainLow").size());
  CHECK(data.at("roll").at("model").at("f").size() == 160);
  CHECK(page == page_of(sample_identify(), sample_gains()));  // no date, no order of chance
}

TEST_CASE("report page: text from files is shown as text") {
  IdentifyResult result = sample_identify();
  result.vehicle_name = "</script><script>alert(1)</script>{{body}}";
  result.warnings.insert(result.warnings.begin(), "<img src=x onerror=alert(1)>");
  result.axes.at(ident::Axis::roll).response.settings = "<b>\"bold\"</b>";
  GainsResult gains = sample_gains();
  gains.axes.at(ident::Axis::roll).loops[0].binding = "<i>slanted</i>";
  const std::string page = page_of(result, gains);
  CHECK(page.find("<script>alert") == std::string::npos);
  CHECK(page.find("<img") == std::string::npos);
  CHECK(page.find("<b>\"bold") == std::string::npos);
  CHECK(page.find("<i>slanted") == std::string::npos);
  CHECK_THAT(page, Contains("&lt;i&gt;slanted"));
}

TEST_CASE("report page: every plot has a sentence, every loop its margins and its mark") {
  const GainsResult gains = sample_gains();
  const std::string page = visible(page_of(sample_identify(), gains));
  // Four axes: gain, phase, coherence, one validation record.
  CHECK(count(page, "class=\"plot\"") == 16);
  CHECK(count(page, "<figcaption>") == 16);
  CHECK(count(page, "<p></p>") == 0);
  int rows = 0;
  int met = 0;
  for (const auto& [axis, recommendation] : gains.axes) {
    const auto add = [&](const std::optional<ident::MarginRanges>& margins) {
      if (!margins) return;
      ++rows;
      met += meets(*margins, gains.requirements) ? 1 : 0;
    };
    for (const ident::LoopRecommendation& loop : recommendation.loops) {
      add(loop.present_margins);
      add(loop.recommended_margins);
    }
    add(recommendation.present_at_demand);
    add(recommendation.recommended_at_demand);
  }
  const std::string table = page.substr(page.find("id=\"gains\""));
  CHECK(count(table, met_mark(true)) == static_cast<std::size_t>(met));
  CHECK(count(table, met_mark(false)) == static_cast<std::size_t>(rows - met));
  CHECK(met > 0);
  CHECK(rows > met);
  CHECK(count(table, "No new gains") == 6);  // climb rate, altitude, velocity and position of x and y
  CHECK(count(table, "no crossing in band") == 4);
  CHECK_THAT(table, Contains("Held back by"));
  CHECK_THAT(page, Contains("not identifiable"));
}

TEST_CASE("report page: without models, gains, validation or excitation it still says what there is") {
  SECTION("direct estimate only: a large plain warning") {
    const std::string page = visible(page_of(sample_identify({.direct_only = true}), std::nullopt));
    CHECK_THAT(page, Contains("The vehicle was not identified: no excitation was logged"));
    CHECK(page.find("class=\"alarm\"") < page.find("id=\"warnings\""));
    CHECK(count(page, "<b>Direct estimate only.</b>") == 4);
    CHECK(count(page, "<b>No model.</b>") == 4);
    CHECK_THAT(page, Contains("No margins and no recommended gains"));
    CHECK(page.find("id=\"bring-up\"") == std::string::npos);
  }
  SECTION("no models") {
    const std::string page = visible(page_of(sample_identify({.with_models = false}), std::nullopt));
    CHECK_THAT(page, Contains("The fit did not converge"));
    CHECK(count(page, "class=\"plot\"") == 12);
  }
  SECTION("no validation") {
    const std::string page = visible(page_of(sample_identify({.with_validation = false}), sample_gains()));
    CHECK(count(page, "<b>No validation record.</b>") == 4);
    CHECK_THAT(page, Contains("no validation record, so the model is checked only against the data"));
  }
  SECTION("an axis without any response") {
    IdentifyResult result = sample_identify();
    result.axes.at(ident::Axis::yaw) = AxisResult{};
    result.axes.at(ident::Axis::yaw).no_model_reason = "the log holds no sweep on this axis";
    const std::string page = visible(page_of(result, sample_gains()));
    CHECK_THAT(page, Contains("Yaw: no response could be computed. the log holds no sweep on this axis."));
    CHECK_THAT(page, Contains("<b>No response.</b>"));
  }
  SECTION("nothing at all") {
    const std::string page = visible(page_of(IdentifyResult{}, std::nullopt));
    CHECK_THAT(page, Contains("No gains are recommended"));
  }
}

TEST_CASE("report sentences: units of parameters as a page shows them") {
  CHECK(shown_unit("rad/s^2").text == "rad/s\u00b2");
  CHECK(shown_unit("m/s^2").text == "m/s\u00b2");
  CHECK(shown_unit("s").text == "ms");
}

TEST_CASE("report sentences: the residual is judged against its own spread") {
  ident::ModelFit fit;
  fit.residual_degrees_of_freedom = 200.0;  // standard deviation 0.1, so 1.3 and 0.7 are the limits
  const auto verdict = [&](double value) {
    fit.reduced_chi_square = value;
    return judge_residual(fit);
  };
  CHECK(verdict(1.0) == ResidualVerdict::as_expected);
  CHECK(verdict(1.29) == ResidualVerdict::as_expected);
  CHECK(verdict(1.31) == ResidualVerdict::larger);
  CHECK(verdict(2.1) == ResidualVerdict::much_larger);
  CHECK(verdict(0.69) == ResidualVerdict::smaller);
}

TEST_CASE("report page: steps lead from the present to the recommended gains, none above 30 %") {
  const ident::LoopGains present{0.045, 0.05, 0.0, {}, 0.3};
  const ident::LoopGains recommended{0.2314, 3.316, 0.0084, 40.0, 0.3};
  const GainSteps steps = gain_steps(present, recommended);
  CHECK(steps.steps == 16);  // ln(3.316/0.05)/ln(1.3) = 15.99
  REQUIRE(steps.kp_factor);
  REQUIRE(steps.ki_factor);
  CHECK(*steps.ki_factor <= 1.3);
  // exp and pow of a sixteenth: a few ulp, 1e-12 leaves room.
  CHECK(present.kp * std::pow(*steps.kp_factor, steps.steps) == Approx(recommended.kp).epsilon(1e-12));
  CHECK(present.ki * std::pow(*steps.ki_factor, steps.steps) == Approx(recommended.ki).epsilon(1e-12));
  CHECK_FALSE(steps.kd_factor);
  CHECK(gain_steps(present, present).steps == 1);
  const GainSteps down = gain_steps(recommended, present);
  CHECK(down.steps == 16);
  CHECK(*down.ki_factor < 1.0);
}

TEST_CASE("report sentences: requirements are met by the nominal model and by the stated share of draws") {
  const ident::GainRequirements requirements;
  ident::MarginRanges margins;
  margins.gain_margin_db = {7.0, 6.0, 8.0};
  margins.phase_margin_deg = {50.0, 45.0, 55.0};
  margins.sensitivity_peak = {1.8, 1.7, 1.9};
  margins.stable_share = 1.0;
  margins.meets_share = 0.96;
  CHECK(meets(margins, requirements));
  SECTION("share of draws") {
    margins.meets_share = 0.94;
    CHECK_FALSE(meets(margins, requirements));
  }
  SECTION("stability") {
    margins.stable_share = 0.9;
    CHECK_FALSE(meets(margins, requirements));
  }
  SECTION("gain margin") {
    margins.gain_margin_db->nominal = 5.94;
    CHECK_FALSE(meets(margins, requirements));
  }
  SECTION("an optimum on the requirement, as shown") {
    margins.gain_margin_db->nominal = 5.96;
    CHECK(meets(margins, requirements));
  }
  SECTION("phase margin") {
    margins.phase_margin_deg->nominal = 44.9;
    CHECK_FALSE(meets(margins, requirements));
  }
  SECTION("sensitivity peak") {
    margins.sensitivity_peak->nominal = 2.01;
    CHECK_FALSE(meets(margins, requirements));
  }
  SECTION("a margin that does not exist cannot fail") {
    margins.gain_margin_db.reset();
    CHECK(meets(margins, requirements));
  }
}

TEST_CASE(
    "report sentences: feedback-biased axes, unbounded points and failing gains are warned of once each") {
  IdentifyResult result = sample_identify();
  // Every pitch point unbounded: how many the sample has by itself hangs on its noise.
  for (ident::PairNoise& noise : result.axes.at(ident::Axis::pitch).response.noise) noise.bb = 1e6;
  const std::vector<std::string> warnings = page_warnings(result, sample_gains());
  const auto has = [&](const std::string& words) {
    return std::count_if(warnings.begin(), warnings.end(), [&](const std::string& warning) {
      return warning.find(words) != std::string::npos;
    });
  };
  CHECK(has("without any error bound") == 1);
  CHECK(has("pitch 400 of 400") == 1);
  CHECK(has("heave: with the present gains, unstable for part of the models the data allow: climb rate (3.0 "
            "%)") == 1);
  CHECK(has("close to the border of stability") == 1);
  CHECK(has("yaw: not identifiable from this flight: damping") == 1);
}
