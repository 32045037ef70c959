// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <filesystem>
#include <ostream>
#include <string>
#include <vector>

#include "reports/result_files.h"

namespace hoverwright::ident {

/// Files of a study folder.
std::filesystem::path vehicle_file(const std::filesystem::path& study);
std::filesystem::path schedule_file(const std::filesystem::path& study);
std::filesystem::path responses_file(const std::filesystem::path& study);
std::filesystem::path models_file(const std::filesystem::path& study);
std::filesystem::path gains_file(const std::filesystem::path& study);
std::filesystem::path report_file(const std::filesystem::path& study);

/// @throws Failure (bad_input) saying which command writes the file when it is not there.
void require_step(const std::filesystem::path& file, const std::string& command);

/// The log to use when none is named: the only file in study/logs.
/// @throws Failure (bad_input) when there is none, or several (listing them).
std::filesystem::path only_log(const std::filesystem::path& study);

/// Program version, command and the SHA-256 of every input file (inputs are named by their path below the
/// study where they lie in it).
reports::Provenance make_provenance(const std::filesystem::path& study, const std::string& command,
                                    const std::vector<std::filesystem::path>& inputs);

/// Number with `digits` significant digits and no exponent for everyday sizes: 271.3, 0.04512.
std::string significant(double value, int digits = 4);

}  // namespace hoverwright::ident
