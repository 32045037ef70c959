// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/files.h"

#include <catch2/catch.hpp>
#include <filesystem>
#include <string>

#include "ident/failure.h"
#include "tests/run_script.h"

using namespace hoverwright::ident;
using hoverwright::tests::TemporaryFolder;
namespace fs = std::filesystem;

namespace {

long entries(const fs::path& folder) {
  return static_cast<long>(std::distance(fs::directory_iterator(folder), fs::directory_iterator()));
}

}  // namespace

TEST_CASE("files: what is written is read back byte by byte, and only that file is left") {
  const TemporaryFolder folder;
  std::string bytes;
  for (int i = 0; i < 100'000; ++i) bytes += static_cast<char>(i % 256);
  const fs::path path = folder.path() / "deep" / "er" / "file.bin";
  write_file(path, bytes);
  CHECK(read_file(path) == bytes);
  write_file(path, "short");
  CHECK(read_file(path) == "short");
  write_file(path, "");
  CHECK(read_file(path).empty());
  CHECK(entries(path.parent_path()) == 1);
}

TEST_CASE("files: a write that fails leaves what was there and no rubbish") {
  const TemporaryFolder folder;
  const fs::path occupied = folder.path() / "occupied";
  fs::create_directories(occupied / "inside");  // a folder that is not empty cannot be replaced by a file
  CHECK_THROWS_AS(write_file(occupied, "text"), Failure);
  CHECK(fs::is_directory(occupied / "inside"));
  CHECK(entries(folder.path()) == 1);

  const fs::path file = folder.path() / "file";
  write_file(file, "text");
  CHECK_THROWS_AS(write_file(file / "below_a_file", "x"), Failure);
  CHECK(read_file(file) == "text");
}

TEST_CASE("files: failures name the path and are bad input") {
  const TemporaryFolder folder;
  for (const fs::path& path : {folder.path() / "none", folder.path()}) {
    try {
      read_file(path);
      FAIL("no failure");
    } catch (const Failure& failure) {
      CHECK(failure.exit_code() == 2);
      CHECK(failure.where() == path.string());
    }
  }
}

TEST_CASE("files: SHA-256 of the examples of FIPS 180-4") {
  const TemporaryFolder folder;
  const fs::path path = folder.path() / "file";
  write_file(path, "abc");
  CHECK(sha256_of_file(path) == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
  write_file(path, "");
  CHECK(sha256_of_file(path) == "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855");
}
