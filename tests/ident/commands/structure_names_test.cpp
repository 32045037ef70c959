// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/vehicle/structure_names.h"

#include <algorithm>
#include <catch2/catch.hpp>
#include <string>
#include <vector>

#include "ident/models/structure.h"

using namespace hoverwright::ident;

TEST_CASE("the vehicle file knows exactly the structures and parameters that the models have") {
  std::vector<std::string> in_files;
  for (const StructureName& structure : kStructureNames) in_files.emplace_back(structure.name);
  std::vector<std::string> in_models = Structure::names();
  std::sort(in_files.begin(), in_files.end());
  std::sort(in_models.begin(), in_models.end());
  CHECK(in_files == in_models);
  for (const std::string& name : in_models) {
    for (const ParameterSpec& parameter : Structure::find(name).parameters()) {
      INFO(name << " " << parameter.name);
      CHECK(std::find(kParameterNames.begin(), kParameterNames.end(), parameter.name) !=
            kParameterNames.end());
    }
  }
}
