// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/result_files.h"

#include <catch2/catch.hpp>
#include <cmath>
#include <functional>
#include <limits>
#include <nlohmann/json.hpp>

#include "ident/failure.h"
#include "ident/files.h"
#include "tests/reports/sample_study.h"
#include "tests/run_script.h"

using namespace hoverwright;
using namespace hoverwright::reports;
using tests::sample_gains;
using tests::sample_identify;
using tests::sample_provenance;

namespace {

/// Bit for bit, NaN equal to NaN: the files promise the same double back.
template <typename Derived, typename Other>
bool same(const Eigen::MatrixBase<Derived>& one, const Eigen::MatrixBase<Other>& other) {
  if (one.rows() != other.rows() || one.cols() != other.cols()) return false;
  const auto equal = [](double x, double y) { return x == y || (std::isnan(x) && std::isnan(y)); };
  for (Eigen::Index i = 0; i < one.rows(); ++i) {
    for (Eigen::Index j = 0; j < one.cols(); ++j) {
      if (!equal(std::real(one(i, j)), std::real(other(i, j))) ||
          !equal(std::imag(one(i, j)), std::imag(other(i, j))))
        return false;
    }
  }
  return true;
}

struct StudyFiles {
  tests::TemporaryFolder folder;
  std::filesystem::path responses = folder.path() / "responses.json";
  std::filesystem::path models = folder.path() / "models.json";
  std::filesystem::path gains = folder.path() / "gains.json";

  void write(const IdentifyResult& result) const {
    ident::write_file(responses, responses_to_json(result, sample_provenance()));
    ident::write_file(models, models_to_json(result, sample_provenance()));
  }
};

void check_same_response(const ident::FrequencyResponse& one, const ident::FrequencyResponse& other) {
  CHECK(one.reference_based == other.reference_based);
  CHECK(one.method == other.method);
  CHECK(one.settings == other.settings);
  CHECK(one.records == other.records);
  CHECK(one.sample_rate_hz == other.sample_rate_hz);
  CHECK(one.segments == other.segments);
  CHECK(same(one.frequency_hz, other.frequency_hz));
  CHECK(same(one.a, other.a));
  CHECK(same(one.b, other.b));
  REQUIRE(one.noise.size() == other.noise.size());
  bool noise_same = true;
  for (std::size_t k = 0; k < one.noise.size(); ++k) {
    noise_same = noise_same && one.noise[k].aa == other.noise[k].aa && one.noise[k].bb == other.noise[k].bb &&
                 one.noise[k].ab == other.noise[k].ab;
  }
  CHECK(noise_same);
  CHECK(same(one.degrees_of_freedom, other.degrees_of_freedom));
  CHECK(same(one.neighbour_correlation[0], other.neighbour_correlation[0]));
  CHECK(same(one.neighbour_correlation[1], other.neighbour_correlation[1]));
  CHECK(same(one.coherence_ry, other.coherence_ry));
  CHECK(same(one.coherence_ru, other.coherence_ru));
  CHECK(same(one.coherence_uy, other.coherence_uy));
  CHECK(same(one.direct, other.direct));
  CHECK(same(one.direct_variance, other.direct_variance));
  CHECK(same(one.output_noise_psd, other.output_noise_psd));
}

void check_same_model(const ident::ModelFit& one, const ident::ModelFit& other) {
  CHECK(one.status == other.status);
  CHECK(one.structure == other.structure);
  CHECK(one.sample_rate_hz == other.sample_rate_hz);
  REQUIRE(one.parameters.size() == other.parameters.size());
  for (std::size_t i = 0; i < one.parameters.size(); ++i) {
    const ident::ParameterEstimate& p = one.parameters[i];
    const ident::ParameterEstimate& q = other.parameters[i];
    CHECK(p.name == q.name);
    CHECK(p.unit == q.unit);
    CHECK(p.value == q.value);
    CHECK(p.standard_error == q.standard_error);
    CHECK(p.low == q.low);
    CHECK(p.high == q.high);
    CHECK(p.identifiable == q.identifiable);
  }
  CHECK(same(one.covariance, other.covariance));
  CHECK(same(one.fitted_covariance, other.fitted_covariance));
  CHECK(one.reduced_chi_square == other.reduced_chi_square);
  CHECK(one.residual_degrees_of_freedom == other.residual_degrees_of_freedom);
  CHECK(one.points == other.points);
  CHECK(one.iterations == other.iterations);
  CHECK(one.band_low_hz == other.band_low_hz);
  CHECK(one.band_high_hz == other.band_high_hz);
  CHECK(one.warnings == other.warnings);
}

void check_same_range(const std::optional<ident::Range>& one, const std::optional<ident::Range>& other) {
  REQUIRE(one.has_value() == other.has_value());
  if (!one) return;
  CHECK(one->nominal == other->nominal);
  CHECK(one->low == other->low);
  CHECK(one->high == other->high);
}

void check_same_margins(const ident::MarginRanges& one, const ident::MarginRanges& other) {
  check_same_range(one.gain_margin_db, other.gain_margin_db);
  check_same_range(one.phase_margin_deg, other.phase_margin_deg);
  check_same_range(one.sensitivity_peak, other.sensitivity_peak);
  check_same_range(one.crossover_hz, other.crossover_hz);
  CHECK(one.stable_share == other.stable_share);
  CHECK(one.meets_share == other.meets_share);
}

void check_same_gains(const ident::LoopGains& one, const ident::LoopGains& other) {
  CHECK(one.kp == other.kp);
  CHECK(one.ki == other.ki);
  CHECK(one.kd == other.kd);
  CHECK(one.derivative_cutoff_hz == other.derivative_cutoff_hz);
  CHECK(one.limit == other.limit);
}

/// The failure that reading gives, for its words.
ident::Failure failure_of(const std::function<void()>& read) {
  try {
    read();
  } catch (const ident::Failure& failure) {
    return failure;
  }
  FAIL("no failure");
  return {ident::FailureKind::internal_error, "", "", ""};
}

}  // namespace

TEST_CASE("result files: responses and models come back as the same doubles") {
  const IdentifyResult result = sample_identify();
  StudyFiles files;
  files.write(result);
  const IdentifyResult back = read_identify_result(files.responses, files.models);
  CHECK(back.vehicle_name == result.vehicle_name);
  CHECK(back.warnings == result.warnings);
  REQUIRE(back.axes.size() == result.axes.size());
  for (const auto& [axis, found] : result.axes) {
    const AxisResult& other = back.axes.at(axis);
    check_same_response(found.response, other.response);
    CHECK(found.feedback_bias.present == other.feedback_bias.present);
    if (found.feedback_bias.present) {
      CHECK(found.feedback_bias.low_hz == other.feedback_bias.low_hz);
      CHECK(found.feedback_bias.high_hz == other.feedback_bias.high_hz);
      CHECK(found.feedback_bias.median_difference == other.feedback_bias.median_difference);
    }
    REQUIRE(other.model.has_value());
    check_same_model(*found.model, *other.model);
    CHECK(other.no_model_reason.empty());
    REQUIRE(other.validation.size() == found.validation.size());
    for (std::size_t i = 0; i < found.validation.size(); ++i) {
      CHECK(same(found.validation[i].time_s, other.validation[i].time_s));
      CHECK(same(found.validation[i].measured, other.validation[i].measured));
      CHECK(same(found.validation[i].simulated, other.validation[i].simulated));
      CHECK(found.validation[i].fit_percent == other.validation[i].fit_percent);
      CHECK(found.validation[i].theil_inequality == other.validation[i].theil_inequality);
    }
  }
  const Provenance provenance = read_provenance(files.models);
  CHECK(provenance.program_version == sample_provenance().program_version);
  CHECK(provenance.command == sample_provenance().command);
  CHECK(provenance.inputs == sample_provenance().inputs);
}

TEST_CASE("result files: gains come back as the same values") {
  const GainsResult result = sample_gains();
  StudyFiles files;
  ident::write_file(files.gains, gains_to_json(result, sample_provenance()));
  const GainsResult back = read_gains_result(files.gains);
  CHECK(back.vehicle_name == result.vehicle_name);
  CHECK(back.warnings == result.warnings);
  CHECK(back.requirements.gain_margin_db == result.requirements.gain_margin_db);
  CHECK(back.requirements.phase_margin_deg == result.requirements.phase_margin_deg);
  CHECK(back.requirements.sensitivity_peak == result.requirements.sensitivity_peak);
  CHECK(back.requirements.share_of_draws == result.requirements.share_of_draws);
  CHECK(back.requirements.draws == result.requirements.draws);
  CHECK(back.requirements.seed == result.requirements.seed);
  CHECK(back.requirements.demand_noise_rms == result.requirements.demand_noise_rms);
  REQUIRE(back.axes.size() == result.axes.size());
  for (const auto& [axis, recommendation] : result.axes) {
    const ident::AxisRecommendation& other = back.axes.at(axis);
    CHECK(other.axis == recommendation.axis);
    CHECK(other.warnings == recommendation.warnings);
    check_same_margins(other.present_at_demand, recommendation.present_at_demand);
    REQUIRE(other.recommended_at_demand.has_value() == recommendation.recommended_at_demand.has_value());
    if (other.recommended_at_demand)
      check_same_margins(*other.recommended_at_demand, *recommendation.recommended_at_demand);
    REQUIRE(other.loops.size() == recommendation.loops.size());
    for (std::size_t i = 0; i < other.loops.size(); ++i) {
      const ident::LoopRecommendation& loop = recommendation.loops[i];
      CHECK(other.loops[i].loop == loop.loop);
      CHECK(other.loops[i].note == loop.note);
      CHECK(other.loops[i].binding == loop.binding);
      check_same_gains(other.loops[i].present, loop.present);
      check_same_margins(other.loops[i].present_margins, loop.present_margins);
      REQUIRE(other.loops[i].recommended.has_value() == loop.recommended.has_value());
      if (!loop.recommended) continue;
      check_same_gains(*other.loops[i].recommended, *loop.recommended);
      check_same_margins(*other.loops[i].recommended_margins, *loop.recommended_margins);
    }
  }
}

TEST_CASE("result files: the keys other programs rely on are there, in the stated units") {
  const IdentifyResult result = sample_identify();
  const nlohmann::json responses = nlohmann::json::parse(responses_to_json(result, sample_provenance()));
  CHECK(responses.at("format") == "hoverwright.responses/1");
  const nlohmann::json& roll = responses.at("axes").at("roll");
  const std::size_t points = roll.at("frequency_hz").size();
  for (const char* key : {"gain_db", "phase_deg", "coherence", "gain_std_db", "phase_std_deg", "real", "imag",
                          "variance", "degrees_of_freedom"}) {
    INFO(key);
    CHECK(roll.at(key).size() == points);
  }
  CHECK(roll.at("method").is_string());
  CHECK(roll.at("records") == 2);
  // Definitions, at one point: 1e-12 relative is hundreds of ulp for a handful of operations.
  const std::complex<double> value(roll.at("real")[40].get<double>(), roll.at("imag")[40].get<double>());
  const double relative_std = std::sqrt(roll.at("variance")[40].get<double>() / 2.0) / std::abs(value);
  CHECK(roll.at("gain_db")[40].get<double>() == Approx(20.0 * std::log10(std::abs(value))).epsilon(1e-12));
  CHECK(roll.at("gain_std_db")[40].get<double>() ==
        Approx(20.0 / std::log(10.0) * relative_std).epsilon(1e-12));
  CHECK(roll.at("phase_std_deg")[40].get<double>() ==
        Approx(180.0 / std::acos(-1.0) * relative_std).epsilon(1e-12));

  const nlohmann::json models = nlohmann::json::parse(models_to_json(result, sample_provenance()));
  CHECK(models.at("format") == "hoverwright.models/1");
  const nlohmann::json& model = models.at("axes").at("yaw");
  for (const char* key : {"structure", "parameters", "band_hz", "reduced_chi_square", "points", "validation",
                          "covariance", "covariance_order"}) {
    INFO(key);
    CHECK(model.contains(key));
  }
  for (const char* key : {"value", "standard_error", "low", "high", "unit"})
    CHECK(model.at("parameters").at("delay").contains(key));
  CHECK(model.at("covariance_order") ==
        std::vector<std::string>{"effectiveness", "damping", "motor_lag", "reaction_lead", "delay"});

  const nlohmann::json gains = nlohmann::json::parse(gains_to_json(sample_gains(), sample_provenance()));
  CHECK(gains.at("format") == "hoverwright.gains/1");
  for (const char* place : {"loops", "present"}) {
    const nlohmann::json& loop = gains.at(place).at("roll_rate");
    for (const char* key : {"kp", "ki", "kd"}) CHECK(loop.at(key).is_number());
    for (const char* key : {"gain_margin_db", "phase_margin_deg", "sensitivity_peak", "crossover_hz"}) {
      for (const char* part : {"nominal", "low", "high"})
        CHECK(loop.at("margins").at(key).at(part).is_number());
    }
  }
  CHECK_FALSE(gains.at("loops").contains("altitude"));
  CHECK(gains.at("present").contains("altitude"));
}

TEST_CASE("result files: a number that is not finite is written as null and read as NaN") {
  IdentifyResult result = sample_identify();
  ident::FrequencyResponse& response = result.axes.at(ident::Axis::roll).response;
  response.coherence_uy(3) = std::numeric_limits<double>::quiet_NaN();
  response.b(5) = 0.0;  // the ratio there is infinite
  result.axes.at(ident::Axis::roll).model->parameters[1].high = std::numeric_limits<double>::infinity();
  StudyFiles files;
  files.write(result);
  const nlohmann::json roll = nlohmann::json::parse(ident::read_file(files.responses)).at("axes").at("roll");
  CHECK(roll.at("coherence")[3].is_null());
  CHECK(roll.at("gain_db")[5].is_null());
  const IdentifyResult back = read_identify_result(files.responses, files.models);
  CHECK(std::isnan(back.axes.at(ident::Axis::roll).response.coherence_uy(3)));
  CHECK(std::isnan(back.axes.at(ident::Axis::roll).model->parameters[1].high));
}

TEST_CASE("result files: no models, no excitation, no points") {
  StudyFiles files;
  SECTION("models.json absent") {
    ident::write_file(files.responses, responses_to_json(sample_identify(), sample_provenance()));
    const IdentifyResult back = read_identify_result(files.responses, files.models);
    CHECK_FALSE(back.axes.at(ident::Axis::roll).model.has_value());
  }
  SECTION("direct estimate only") {
    const IdentifyResult result = sample_identify({.direct_only = true});
    files.write(result);
    const IdentifyResult back = read_identify_result(files.responses, files.models);
    check_same_response(result.axes.at(ident::Axis::yaw).response, back.axes.at(ident::Axis::yaw).response);
    CHECK(back.axes.at(ident::Axis::yaw).no_model_reason == result.axes.at(ident::Axis::yaw).no_model_reason);
    CHECK_FALSE(back.axes.at(ident::Axis::yaw).model.has_value());
  }
  SECTION("an axis whose log held nothing") {
    IdentifyResult result;
    result.vehicle_name = "Tern";
    result.axes[ident::Axis::roll].no_model_reason = "the log holds no sweep on this axis";
    files.write(result);
    const IdentifyResult back = read_identify_result(files.responses, files.models);
    CHECK(back.axes.at(ident::Axis::roll).response.points() == 0);
    CHECK(back.axes.at(ident::Axis::roll).no_model_reason == "the log holds no sweep on this axis");
  }
}

TEST_CASE("result files: what does not fit is refused with file and JSON pointer") {
  StudyFiles files;
  const IdentifyResult result = sample_identify();
  files.write(result);
  ident::write_file(files.gains, gains_to_json(sample_gains(), sample_provenance()));
  using Change = std::function<void(nlohmann::json&)>;
  struct Case {
    const char* file;
    const char* pointer;
    const char* words;
    Change change;
  };
  const std::vector<Case> cases{
      {"responses.json", "/format", "expected \"hoverwright.responses/1\"",
       [](auto& j) { j["format"] = "hoverwright.models/1"; }},
      {"responses.json", "/axes/surge", "is not an axis",
       [](auto& j) { j["axes"]["surge"] = j["axes"]["roll"]; }},
      {"responses.json", "/axes/roll/colour", "not known", [](auto& j) { j["axes"]["roll"]["colour"] = 1; }},
      {"responses.json", "/axes/roll/pair/a_real", "numbers where",
       [](auto& j) { j["axes"]["roll"]["pair"]["a_real"].erase(0); }},
      {"responses.json", "/axes/roll/pair/b_imag", "missing",
       [](auto& j) { j["axes"]["roll"]["pair"].erase("b_imag"); }},
      {"responses.json", "/axes/roll/pair/noise_aa", "negative",
       [](auto& j) { j["axes"]["roll"]["pair"]["noise_aa"][7] = -1.0; }},
      {"responses.json", "/axes/roll/frequency_hz", "rise",
       [](auto& j) { j["axes"]["roll"]["frequency_hz"][2] = 0.1; }},
      {"responses.json", "/axes/roll/real", "not a/b", [](auto& j) { j["axes"]["roll"]["real"][2] = 0.1; }},
      {"responses.json", "/axes/roll/gain_db", "number or null",
       [](auto& j) { j["axes"]["roll"]["gain_db"][2] = "low"; }},
      {"responses.json", "/axes/roll/reference_based", "true or false",
       [](auto& j) { j["axes"]["roll"]["reference_based"] = 1; }},
      {"responses.json", "/axes/roll/records", "whole number",
       [](auto& j) { j["axes"]["roll"]["records"] = 1.5; }},
      {"models.json", "/axes/roll/structure", "not a structure",
       [](auto& j) { j["axes"]["roll"]["structure"] = "rate_magic"; }},
      {"models.json", "/axes/roll/covariance_order", "expected effectiveness, damping",
       [](auto& j) { j["axes"]["roll"]["covariance_order"][0] = "delay"; }},
      {"models.json", "/axes/roll/covariance", "rows where",
       [](auto& j) { j["axes"]["roll"]["covariance"].erase(0); }},
      {"models.json", "/axes/roll/parameters/delay/unit", "missing",
       [](auto& j) { j["axes"]["roll"]["parameters"]["delay"].erase("unit"); }},
      {"models.json", "/axes/roll/band_hz", "rising",
       [](auto& j) {
         j["axes"]["roll"]["band_hz"] = {4.0, 2.0};
       }},
      {"models.json", "/axes/roll/validation/0/measured", "numbers where",
       [](auto& j) { j["axes"]["roll"]["validation"][0]["measured"].erase(0); }},
      {"models.json", "/provenance", "not from the run",
       [](auto& j) { j["provenance"]["inputs"]["logs/flight.csv"] = "0"; }},
      {"models.json", "/without_model/surge", "is not an axis",
       [](auto& j) { j["without_model"]["surge"] = "gone"; }},
      {"gains.json", "/present/roll_rate/kp", "number",
       [](auto& j) { j["present"]["roll_rate"]["kp"] = "high"; }},
      {"gains.json", "/present/roll_rate", "missing", [](auto& j) { j["present"].erase("roll_rate"); }},
      {"gains.json", "/loops/roll_rate/margins/gain_margin_db/low", "missing",
       [](auto& j) { j["loops"]["roll_rate"]["margins"]["gain_margin_db"].erase("low"); }},
      {"gains.json", "/axes/roll/loops", "not a loop",
       [](auto& j) { j["axes"]["roll"]["loops"][0] = "surge_rate"; }},
      {"gains.json", "/loops/altitde", "not known",
       [](auto& j) { j["loops"]["altitde"] = j["loops"]["roll_rate"]; }},
  };
  for (const Case& one : cases) {
    INFO(one.file << " " << one.pointer);
    const std::filesystem::path path = files.folder.path() / one.file;
    const std::string good = ident::read_file(path);
    nlohmann::json json = nlohmann::json::parse(good);
    one.change(json);
    ident::write_file(path, json.dump());
    const ident::Failure failure = failure_of([&] {
      read_identify_result(files.responses, files.models);
      read_gains_result(files.gains);
    });
    CHECK(failure.exit_code() == 2);
    CHECK_THAT(failure.where(), Catch::Contains(one.file) && Catch::Contains(one.pointer));
    CHECK_THAT(failure.problem(), Catch::Contains(one.words));
    ident::write_file(path, good);
  }
  CHECK_NOTHROW(read_identify_result(files.responses, files.models));
}

TEST_CASE("result files: text that is not JSON, or no file, is one clear failure") {
  StudyFiles files;
  CHECK(failure_of([&] { read_identify_result(files.responses, files.models); }).exit_code() == 2);
  ident::write_file(files.responses, "{ \"format\": ");
  const ident::Failure failure = failure_of([&] { read_identify_result(files.responses, files.models); });
  CHECK(failure.exit_code() == 2);
  CHECK_THAT(failure.where(), Catch::Contains("responses.json"));
}
