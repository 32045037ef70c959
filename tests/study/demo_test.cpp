// SPDX-License-Identifier: GPL-3.0-or-later
// The demo and its pages as a newcomer sees them.
#include <fmt/format.h>

#include <catch2/catch.hpp>
#include <filesystem>
#include <string>

#include "ident/files.h"
#include "tests/run_script.h"

using namespace hoverwright;
using tests::run_script;
using tests::ScriptResult;
using tests::TemporaryFolder;

namespace {

ScriptResult program(const std::string& arguments) {
  return run_script(fmt::format("{} {}", HOVERWRIGHT_PROGRAM, arguments));
}

ScriptResult look_at(const std::filesystem::path& page, const std::filesystem::path& picture, int canvases) {
  return run_script(fmt::format("node {}/tests/reports/page_check.mjs '{}' '{}' --canvases {}",
                                HOVERWRIGHT_SOURCE_DIR, page.string(), picture.string(), canvases));
}

}  // namespace

TEST_CASE(
    "demo: one command makes the study, and its pages open in Chromium without network or script errors",
    "[study]") {
  const TemporaryFolder folder;
  const auto study = folder.path() / "tern";
  const std::string quoted = "'" + study.string() + "'";
  const ScriptResult demo = program("demo " + quoted);
  INFO(demo.output);
  REQUIRE(demo.exit_code == 0);
  for (const std::string name :
       {"vehicle.json", "schedule.json", "playback/schedule.csv", "flight_card.html", "logs/rehearsal.csv",
        "responses.json", "models.json", "gains.json", "report.html"}) {
    INFO(name);
    CHECK(std::filesystem::file_size(study / name) > 0);
  }
  // Per axis gain, phase, coherence and one plot per doublet.
  const ScriptResult report = look_at(study / "report.html", folder.path() / "report.png", 20);
  INFO(report.output);
  CHECK(report.exit_code == 0);
  CHECK(std::filesystem::file_size(folder.path() / "report.png") > 100000);
  const ScriptResult card = look_at(study / "flight_card.html", folder.path() / "card.png", 0);
  INFO(card.output);
  CHECK(card.exit_code == 0);
  CHECK(std::filesystem::file_size(folder.path() / "card.png") > 20000);

  // The same seed gives the same bytes, another seed others; the proposed gains fly the same schedule.
  const std::string first = ident::sha256_of_file(study / "logs" / "rehearsal.csv");
  CHECK(program("rehearse " + quoted + " --log again.csv").exit_code == 0);
  CHECK(ident::sha256_of_file(study / "logs" / "again.csv") == first);
  CHECK(program("rehearse " + quoted + " --log other.csv --seed 2").exit_code == 0);
  CHECK(ident::sha256_of_file(study / "logs" / "other.csv") != first);
  CHECK(program("rehearse " + quoted + " --log proposed.csv --recommended").exit_code == 0);

  // An amplitude beyond the limits: the log is written, the limit is named, exit 3.
  REQUIRE(program("schedule " + quoted + " --amplitude roll=0.12").exit_code == 0);
  const ScriptResult wild = program("rehearse " + quoted + " --log wild.csv");
  INFO(wild.output);
  CHECK(wild.exit_code == 3);
  CHECK(wild.output.find("tilt") != std::string::npos);
  CHECK(std::filesystem::exists(study / "logs" / "wild.csv"));
}
