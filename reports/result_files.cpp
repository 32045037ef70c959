// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/result_files.h"

#include <fmt/format.h>

#include "ident/files.h"
#include "reports/result_readers.h"

namespace hoverwright::reports {
namespace fs = std::filesystem;

ident::Axis axis_of(const ResultObject& axes, const std::string& name) {
  const std::optional<ident::Axis> axis = ident::axis_from_name(name);
  if (!axis)
    axes.fail(name, fmt::format("\"{}\" is not an axis", name), "Axes are roll, pitch, yaw and heave.");
  return *axis;
}

IdentifyResult read_identify_result(const fs::path& responses, const fs::path& models) {
  Provenance provenance;
  const nlohmann::json json = ident::parse_json(ident::read_file(responses), responses.string());
  IdentifyResult result = read_responses(ResultObject(json, responses.string()), provenance);
  if (fs::exists(models)) {
    const nlohmann::json models_json = ident::parse_json(ident::read_file(models), models.string());
    read_models(ResultObject(models_json, models.string()), provenance, result);
  }
  return result;
}

GainsResult read_gains_result(const fs::path& gains) {
  const nlohmann::json json = ident::parse_json(ident::read_file(gains), gains.string());
  return read_gains(ResultObject(json, gains.string()));
}

Provenance read_provenance(const fs::path& result) {
  const nlohmann::json json = ident::parse_json(ident::read_file(result), result.string());
  ResultObject file(json, result.string());
  return read_head(file, file.text("format")).provenance;
}

}  // namespace hoverwright::reports
