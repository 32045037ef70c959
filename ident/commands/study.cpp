// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/study.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "ident/failure.h"
#include "ident/files.h"

namespace hoverwright::ident {
namespace fs = std::filesystem;

fs::path vehicle_file(const fs::path& study) {
  return study / "vehicle.json";
}
fs::path schedule_file(const fs::path& study) {
  return study / "schedule.json";
}
fs::path responses_file(const fs::path& study) {
  return study / "responses.json";
}
fs::path models_file(const fs::path& study) {
  return study / "models.json";
}
fs::path gains_file(const fs::path& study) {
  return study / "gains.json";
}
fs::path report_file(const fs::path& study) {
  return study / "report.html";
}

void require_step(const fs::path& file, const std::string& command) {
  if (fs::exists(file)) return;
  throw Failure(FailureKind::bad_input, "the study does not have this file yet", file.string(),
                fmt::format("`hoverwright {} {}` writes it.", command, file.parent_path().string()));
}

fs::path only_log(const fs::path& study) {
  const fs::path folder = study / "logs";
  std::vector<fs::path> logs;
  std::error_code error;
  for (const auto& entry : fs::directory_iterator(folder, error)) {
    if (entry.is_regular_file() && entry.path().extension() != ".tmp") logs.push_back(entry.path());
  }
  std::sort(logs.begin(), logs.end());
  if (logs.empty()) {
    throw Failure(
        FailureKind::bad_input, "there is no log", folder.string(),
        "Put the flight's log there, name one with --log, or fly the schedule with `hoverwright rehearse`.");
  }
  if (logs.size() > 1) {
    std::string names;
    for (const fs::path& log : logs) names += (names.empty() ? "" : ", ") + log.filename().string();
    throw Failure(FailureKind::bad_input, fmt::format("there are {} logs: {}", logs.size(), names),
                  folder.string(), "Say which one with --log.");
  }
  return logs.front();
}

reports::Provenance make_provenance(const fs::path& study, const std::string& command,
                                    const std::vector<fs::path>& inputs) {
  reports::Provenance provenance;
  provenance.program_version = HOVERWRIGHT_VERSION;
  provenance.command = command;
  for (const fs::path& input : inputs) {
    const fs::path below = input.lexically_relative(study);
    const bool inside = !below.empty() && *below.begin() != "..";
    provenance.inputs[inside ? below.generic_string() : input.filename().string()] = sha256_of_file(input);
  }
  return provenance;
}

std::string significant(double value, int digits) {
  if (!std::isfinite(value)) return "-";
  const double size = std::abs(value);
  if (size == 0.0) return "0";
  const int exponent = static_cast<int>(std::floor(std::log10(size)));
  if (exponent < -5 || exponent > 6) return fmt::format("{:.{}g}", value, digits);
  return fmt::format("{:.{}f}", value, std::max(0, digits - 1 - exponent));
}

}  // namespace hoverwright::ident
