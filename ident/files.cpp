// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/files.h"

#include <fmt/format.h>
#include <openssl/evp.h>
#include <unistd.h>

#include <array>
#include <fstream>
#include <memory>
#include <sstream>
#include <system_error>

#include "ident/failure.h"

namespace hoverwright::ident {
namespace fs = std::filesystem;

std::string read_file(const fs::path& path) {
  std::error_code error;
  if (fs::is_directory(path, error)) {
    throw Failure(FailureKind::bad_input, "this is a folder, a file is needed", path.string(), "");
  }
  std::ifstream stream(path, std::ios::binary);
  if (!stream) {
    throw Failure(FailureKind::bad_input, "cannot open the file", path.string(),
                  "Check that it exists and may be read.");
  }
  std::ostringstream content;
  content << stream.rdbuf();
  if (stream.bad())
    throw Failure(FailureKind::bad_input, "reading stopped before the end", path.string(), "");
  return std::move(content).str();
}

void write_file(const fs::path& path, std::string_view content) {
  std::error_code error;
  if (path.has_parent_path()) fs::create_directories(path.parent_path(), error);
  fs::path temporary = path;
  temporary += fmt::format(".{}.tmp", ::getpid());
  {
    std::ofstream stream(temporary, std::ios::binary | std::ios::trunc);
    stream.write(content.data(), static_cast<std::streamsize>(content.size()));
    stream.close();
    if (!stream) {
      fs::remove(temporary, error);
      throw Failure(FailureKind::bad_input, "cannot write the file", path.string(),
                    "Check that the folder exists, may be written and has space.");
    }
  }
  fs::rename(temporary, path, error);
  if (error) {
    const std::string reason = error.message();
    fs::remove(temporary, error);
    throw Failure(FailureKind::bad_input, "cannot replace the file: " + reason, path.string(), "");
  }
}

std::string sha256_of_file(const fs::path& path) {
  const std::string content = read_file(path);
  std::array<unsigned char, EVP_MAX_MD_SIZE> digest{};
  unsigned int length = 0;
  if (EVP_Digest(content.data(), content.size(), digest.data(), &length, EVP_sha256(), nullptr) != 1) {
    throw Failure(FailureKind::internal_error, "SHA-256 failed", path.string(), "");
  }
  std::string text;
  for (unsigned int i = 0; i < length; ++i) text += fmt::format("{:02x}", digest[i]);
  return text;
}

}  // namespace hoverwright::ident
