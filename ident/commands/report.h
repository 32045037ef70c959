// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <filesystem>
#include <ostream>

namespace hoverwright::ident {

struct ReportCommandOptions {
  std::filesystem::path study;
};

/// Writes study/report.html from responses.json and, where they exist, models.json and gains.json. Gains
/// computed from other models than those in the study are left out, with a warning. @throws Failure
/// (bad_input) when responses.json is missing or a file is not as it should be.
void run_report(const ReportCommandOptions& options, std::ostream& out);

}  // namespace hoverwright::ident
