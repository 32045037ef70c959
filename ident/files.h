// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <filesystem>
#include <string>
#include <string_view>

namespace hoverwright::ident {

/// Whole file as bytes. @throws Failure (bad_input) naming the path when it cannot be opened or read.
std::string read_file(const std::filesystem::path& path);

/// Writes to a temporary file in the same folder and renames it over `path`, so that an interrupted or failed
/// write leaves the earlier file as it was. Creates missing parent folders.
/// @throws Failure (bad_input) naming the path when the folder cannot be written.
void write_file(const std::filesystem::path& path, std::string_view content);

/// SHA-256 (FIPS 180-4) of the file's bytes, 64 lower-case hexadecimal digits. @throws Failure as read_file.
std::string sha256_of_file(const std::filesystem::path& path);

}  // namespace hoverwright::ident
