// SPDX-License-Identifier: GPL-3.0-or-later
#include <catch2/catch.hpp>
#include <random>
#include <string>
#include <vector>

#include "ident/failure.h"
#include "ident/files.h"
#include "ident/flight_log/csv_reader.h"
#include "ident/flight_log/flight_data.h"
#include "tests/run_script.h"

using namespace hoverwright::ident;
using hoverwright::tests::TemporaryFolder;

namespace {

struct BadLog {
  std::string text;
  std::string place;    // after the file's path
  std::string problem;  // part of it
  std::string advice;   // part of it
};

const std::vector<BadLog> kBadLogs{
    {"", "", "the log is empty", ""},
    {"\n \n\r\n", "", "the log is empty", ""},
    {std::string("t,x\n0,\0\n", 8), ": byte 6", "not a text file", "CSV"},
    {std::string("\xFF\xFEt\0,\0x\0\n\0", 10), ": byte 3", "not a text file", "UTF-8"},
    {"\x1b[31mt,x\n0,1\n", "", "control characters", "CSV"},
    {"t x y\n0 1 2\n", ": line 1", "one column only", "comma, semicolon or tab"},
    {"time\n0\n1\n", ": line 1", "one column only", "comma"},
    {"t,x,t\n0,1,2\n", ": line 1", "\"t\" is there twice", "Rename"},
    {"t,x,,y\n0,1,2,3\n", ": line 1", "column 3 of the header row has no name", ""},
    {"t,x,\n0,1,\n", ": line 1", "column 3 of the header row has no name", "delimiter at the end"},
    {"0.0,1.5,2\n0.1,1.6,2\n", ": line 1", "the first row holds numbers", "header row"},
    {"t,x\n", ": line 1", "no data", ""},
    {"t,x", ": line 1", "no data", ""},
    {"t,x\n0,1\n\n1,2,3\n2,3\n", ": line 4", "more than 2 cells where the header has 2 columns",
     "decimal point"},
    {"t,x,y\n0,1,2\n1,2\n2,3,4\n", ": line 3", "2 cells where the header has 3 columns", ""},
    {"t,x,y\n0,1,2\n1,2,3\n2,3", ": line 4", "2 cells where the header has 3 columns", "cut off"},
    {"t;x\n0;1\n1;2,5\n", ": line 3", "\"2,5\" in column \"x\" is written with a decimal comma",
     "1.5, not 1,5"},
    {"t\tx\n0,01\t1\n", ": line 2", "\"0,01\" in column \"t\" is written with a decimal comma",
     "decimal points"},
    {"t,x\n0,\"-1,5\"\n", ": line 2", "decimal comma", ""},
    {"t,x\n0,1,5\n", ": line 2", "more than 2 cells", "decimal point"},
    {"t,x\n0,\"1\n1,2\n", ": line 2", "quote is opened and not closed", ""},
    {"t,\"x\n0,1\n", ": line 1", "quote is opened and not closed", ""},
};

}  // namespace

TEST_CASE("csv: every malformed log is told with its line, what is wrong and what to do") {
  const TemporaryFolder folder;
  const auto path = folder.path() / "log.csv";
  for (const BadLog& bad : kBadLogs) {
    INFO(bad.text);
    write_file(path, bad.text);
    try {
      read_csv(path);
      FAIL_CHECK("the log was accepted");
    } catch (const Failure& failure) {
      INFO(failure.what());
      CHECK(failure.exit_code() == 2);
      CHECK(failure.where() == path.string() + bad.place);
      CHECK(failure.problem().find(bad.problem) != std::string::npos);
      CHECK(failure.advice().find(bad.advice) != std::string::npos);
    }
  }
}

TEST_CASE("csv: a missing file and a folder are told by name") {
  const TemporaryFolder folder;
  CHECK_THROWS_WITH(read_csv(folder.path() / "none.csv"), Catch::Contains("none.csv"));
  CHECK_THROWS_WITH(read_csv(folder.path()), Catch::Contains("folder"));
}

TEST_CASE("csv: random bytes end in a table or a failure, nothing else") {
  // 2000 files of up to 300 bytes from an alphabet that makes CSV-like rubbish likely; seed 3.
  std::string alphabet = "0123456789.,;\t\n\r\"+-eEx \xEF\xBB\xBF";
  alphabet += "nainf";
  alphabet += '\0';
  std::mt19937 random(3);
  std::uniform_int_distribution<std::size_t> letter(0, alphabet.size() - 1);
  std::uniform_int_distribution<int> length(0, 300);
  const TemporaryFolder folder;
  const auto path = folder.path() / "log.csv";
  long failures = 0;
  for (int run = 0; run < 2000; ++run) {
    std::string text = run % 2 == 0 ? "t,x\n" : "";
    for (int i = length(random); i > 0; --i) {
      const char c = alphabet[letter(random)];
      if (c != '\0' || run % 10 == 0) text += c;
    }
    write_file(path, text);
    try {
      const LogTable log = read_csv(path);
      for (const auto& column : log.columns) REQUIRE(column.size() == log.columns[0].size());
    } catch (const Failure& failure) {
      REQUIRE(failure.exit_code() == 2);
      ++failures;
    }
  }
  CHECK(failures > 1000);
}

TEST_CASE("csv: many columns and many line breaks do not multiply into memory") {
  // 200 000 columns and 2 000 000 line breaks would be 3 TB if every break made a row.
  std::string text;
  text.append("c0");
  for (int column = 1; column < 200'000; ++column) text.append(",c").append(std::to_string(column));
  text.append(2'000'000, '\n');
  text.append("1,2\n");
  const TemporaryFolder folder;
  write_file(folder.path() / "log.csv", text);
  CHECK_THROWS_WITH(read_csv(folder.path() / "log.csv"),
                    Catch::Contains("line 2000001") && Catch::Contains("2 cells"));
}
