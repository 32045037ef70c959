// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include <catch2/catch.hpp>

#include "ident/files.h"
#include "reports/report_page.h"
#include "tests/reports/sample_study.h"
#include "tests/run_script.h"

using namespace hoverwright;

namespace {

tests::ScriptResult open_page(const std::filesystem::path& folder, const std::string& html,
                              const std::string& options) {
  ident::write_file(folder / "page.html", html);
  return tests::run_script(fmt::format("node {}/tests/reports/page_check.mjs {} {} {}",
                                       HOVERWRIGHT_SOURCE_DIR, (folder / "page.html").string(),
                                       (folder / "page.png").string(), options));
}

std::string sample_page(const tests::SampleOptions& options, bool gains) {
  return reports::report_html(tests::sample_identify(options),
                              gains ? std::optional(tests::sample_gains()) : std::nullopt,
                              tests::sample_provenance());
}

}  // namespace

TEST_CASE(
    "report page in Chromium: opens without network, runs without an error, draws every plot [needs "
    "Chromium]",
    "[external]") {
  const tests::TemporaryFolder folder;
  SECTION("everything there") {
    const tests::ScriptResult result = open_page(folder.path(), sample_page({}, true), "--canvases 16");
    INFO(result.output);
    CHECK(result.exit_code == 0);
    CHECK(std::filesystem::file_size(folder.path() / "page.png") >
          100000);  // an empty page of this size takes about 20 kB
  }
  SECTION("direct estimate only") {
    const tests::ScriptResult result =
        open_page(folder.path(), sample_page({.direct_only = true}, false), "--canvases 12");
    INFO(result.output);
    CHECK(result.exit_code == 0);
  }
}

TEST_CASE(
    "page check in Chromium: a page that reaches for the network, fails or stays blank is caught [needs "
    "Chromium]",
    "[external]") {
  const tests::TemporaryFolder folder;
  const auto check = [&](const std::string& body, const std::string& words) {
    const tests::ScriptResult result =
        open_page(folder.path(), "<!doctype html><title>t</title>" + body, "--canvases 1");
    INFO(result.output);
    CHECK(result.exit_code == 1);
    CHECK_THAT(result.output, Catch::Contains(words));
  };
  check("<img src=\"http://192.0.2.1/a.png\">", "request for");  // a documentation address (RFC 5737)
  check("<script>throw new Error('broken')</script>", "script error: broken");
  check("<canvas width=50 height=50></canvas>", "0 of 1 canvases are drawn on");
}
