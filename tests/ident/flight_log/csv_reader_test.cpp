// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/csv_reader.h"

#include <bit>
#include <catch2/catch.hpp>
#include <cmath>
#include <cstdint>
#include <cstdio>
#include <ctime>
#include <random>
#include <string>

#include "ident/failure.h"
#include "ident/files.h"
#include "tests/run_script.h"

using namespace hoverwright::ident;
using hoverwright::tests::TemporaryFolder;

namespace {

LogTable read_text(const std::string& text) {
  const TemporaryFolder folder;
  const auto path = folder.path() / "log.csv";
  write_file(path, text);
  return read_csv(path);
}

}  // namespace

TEST_CASE("csv: comma, semicolon, tab, CRLF, byte order mark, quotes and blank lines mean the same") {
  const std::vector<std::string> texts{
      "t,x,y\n0,1,-2.5\n1,3e2,4\n",           "t;x;y\n0;1;-2.5\n1;3e2;4\n",
      "t\tx\ty\n0\t1\t-2.5\n1\t3e2\t4\n",     "t,x,y\r\n0,1,-2.5\r\n1,3e2,4\r\n",
      "\xEF\xBB\xBFt,x,y\n0,1,-2.5\n1,3e2,4", "\"t\",\"x\" , y\n\"0\", 1 ,\"-2.5\"\n\n1,+3e2,4\n\n   \n",
      "\n\nt,x,y\n0,1,-2.5\n1,300.000,4",
  };
  for (const std::string& text : texts) {
    INFO(text);
    const LogTable log = read_text(text);
    CHECK(log.names == std::vector<std::string>{"t", "x", "y"});
    REQUIRE(log.columns.size() == 3);
    CHECK(log.columns[0] == Eigen::Vector2d(0.0, 1.0));
    CHECK(log.columns[1] == Eigen::Vector2d(1.0, 300.0));
    CHECK(log.columns[2] == Eigen::Vector2d(-2.5, 4.0));
    CHECK(log.missing_cells == std::vector<long>{0, 0, 0});
  }
}

TEST_CASE("csv: numbers come back to the last bit") {
  std::mt19937_64 random(7);
  std::uniform_int_distribution<std::uint64_t> bits;
  std::string text = "t,x\n1772429357.826545238,0\n";
  std::vector<double> written{0.0};
  while (written.size() < 2000) {
    const double value = std::bit_cast<double>(bits(random));
    if (!std::isfinite(value)) continue;
    written.push_back(value);
    char buffer[64];
    std::snprintf(buffer, sizeof buffer, "1,%.17g\n", value);  // 17 digits identify a double
    text += buffer;
  }
  const LogTable log = read_text(text);
  CHECK(log.columns[0][0] == 1772429357.826545238);
  REQUIRE(log.columns[1].size() == static_cast<Eigen::Index>(written.size()));
  long wrong = 0;
  for (std::size_t i = 0; i < written.size(); ++i)
    wrong += log.columns[1][static_cast<Eigen::Index>(i)] != written[i];
  CHECK(wrong == 0);
}

TEST_CASE(
    "csv: cells without a number are NaN and counted, numbers beyond a double too, tiny ones are zero") {
  const LogTable log = read_text(
      "t,x,mode\n0,,hover\n1,nan,\"a, b\"\n2,inf,\"say "
      "\"\"go\"\"\"\n3,1e999,4\n4,-1e-999,x1\n5,0x10,1.5.2\n");
  CHECK(log.missing_cells == std::vector<long>{0, 5, 5});
  CHECK(std::isnan(log.columns[1][0]));
  CHECK(std::isnan(log.columns[1][3]));
  CHECK(log.columns[1][4] == 0.0);
  CHECK(log.columns[2][3] == 4.0);
}

TEST_CASE("csv: names keep what is inside their quotes") {
  const LogTable log = read_text("\"time, s\",\"say \"\"x\"\"\"\n0,1\n");
  CHECK(log.names == std::vector<std::string>{"time, s", "say \"x\""});
  CHECK(log.find("time, s") == 0);
}

TEST_CASE("csv: a column that is not there is told with the nearest one") {
  const LogTable log = read_text("time,gyro_x,gyro_y\n0,1,2\n");
  CHECK(log.find("gyro_y") == 2);
  try {
    static_cast<void>(log.find("gyrox"));
    FAIL("no failure");
  } catch (const Failure& failure) {
    CHECK(failure.exit_code() == 2);
    CHECK(failure.problem() == "no column \"gyrox\"");
    CHECK(failure.advice() == "The nearest column name is \"gyro_x\".");
  }
}

TEST_CASE("csv: a long log is read quickly") {
  // 180 000 rows of 25 columns, 35 MB: 450 s at 400 Hz. The bound is loose (a debug or sanitizer build on a
  // busy machine); an optimised build takes about a quarter of a second.
  std::string row = "-1.00000";
  std::string text = "channel0";
  for (int column = 1; column < 25; ++column) {
    row.append(",").append(std::to_string(0.123456 * column - 1.0), 0, 9);
    text.append(",channel").append(std::to_string(column));
  }
  text.append("\n");
  for (int i = 0; i < 180'000; ++i) text.append(row).append("\n");
  const TemporaryFolder folder;
  write_file(folder.path() / "long.csv", text);
  const std::clock_t start = std::clock();  // processor time: other programs do not count
  const LogTable log = read_csv(folder.path() / "long.csv");
  const double taken_s = static_cast<double>(std::clock() - start) / CLOCKS_PER_SEC;
  CHECK(log.columns[24].size() == 180'000);
  CHECK(taken_s < 10.0);
  WARN(text.size() / 1'000'000 << " MB read in " << taken_s << " s of processor time");
}
