// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/new_vehicle.h"

#include <catch2/catch.hpp>
#include <filesystem>
#include <sstream>

#include "ident/failure.h"
#include "ident/files.h"
#include "ident/vehicle/vehicle.h"
#include "tests/run_script.h"

using namespace hoverwright::ident;
using hoverwright::tests::TemporaryFolder;

TEST_CASE("new: writes a vehicle file that is accepted, into a folder new or old") {
  const TemporaryFolder folder;
  for (const auto& study : {folder.path() / "new" / "study", folder.path()}) {
    std::ostringstream out;
    run_new_vehicle({study, "Gull"}, out);
    CHECK(read_vehicle(study / "vehicle.json").name == "Gull");
    CHECK(out.str().find((study / "vehicle.json").string()) != std::string::npos);
  }
}

TEST_CASE("new: never overwrites") {
  const TemporaryFolder folder;
  write_file(folder.path() / "vehicle.json", "mine");
  std::ostringstream out;
  try {
    run_new_vehicle({folder.path(), "Gull"}, out);
    FAIL("no failure");
  } catch (const Failure& failure) {
    CHECK(failure.exit_code() == 2);
    CHECK(failure.where() == (folder.path() / "vehicle.json").string());
  }
  CHECK(read_file(folder.path() / "vehicle.json") == "mine");
  CHECK(out.str().empty());
}
