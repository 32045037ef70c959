// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/strict_json.h"

#include <catch2/catch.hpp>
#include <string>

#include "ident/failure.h"

using namespace hoverwright::ident;

namespace {

Failure failure_of(const std::string& text) {
  try {
    parse_json(text, "file.json");
  } catch (const Failure& failure) {
    return failure;
  }
  FAIL("no failure");
  throw;  // not reached
}

}  // namespace

TEST_CASE("strict json: comments are accepted and values come through") {
  const auto document =
      parse_json("// a\n{ \"x\": [1, 2.5e-3], // b\n \"s\": \"a // no comment\" }", "file.json");
  StrictObject object(document, "file.json", "");
  CHECK(object.array("x").size() == 2);
  CHECK(object.text("s") == "a // no comment");
  CHECK_NOTHROW(object.finish());
}

TEST_CASE("strict json: the place of a syntax error is a line and a column") {
  struct Case {
    std::string text, where, problem;
  };
  const std::vector<Case> cases{
      {"", "file.json", "empty"},
      {" \n\t\n", "file.json", "empty"},
      {"{\n  \"a\": 1,\n}", "file.json: line 3, column 1", "not valid JSON"},
      {"{\n  \"a\": 1", "file.json: line 2", "not valid JSON"},
      {"{\"a\": 1}\nrest", "file.json: line 2", "not valid JSON"},
      {"{\"a\": nan}", "file.json: line 1", "not valid JSON"},
      {"{\n\"a\": 1e999 }", "file.json: line 2", "beyond the range"},
      {"{ \"a\": 1,\n  \"b\": { \"c\": 1,\n \"c\": 2 } }", "file.json: line 3, column 4",
       "\"c\" is there twice"},
      {std::string("{\"a\": 1\0 }", 10), "file.json: line 1", "not valid JSON"},
      {std::string("\x7f"
                   "ELF\x02\x01\x01\0\0\0",
                   10),
       "file.json: line 1", "not valid JSON"},
      {"{\"a\": \"\xff\xfe\"}", "file.json: line 1", "not valid JSON"},
  };
  for (const Case& c : cases) {
    INFO(c.text);
    const Failure failure = failure_of(c.text);
    INFO(failure.what());
    CHECK(failure.exit_code() == 2);
    CHECK(failure.where().substr(0, c.where.size()) == c.where);
    CHECK(failure.problem().find(c.problem) != std::string::npos);
    CHECK(failure.problem().find("json.exception") == std::string::npos);
    CHECK(failure.problem().find('\0') == std::string::npos);
  }
}

TEST_CASE("strict json: the same key in different objects is no duplicate") {
  CHECK_NOTHROW(parse_json(R"({"a": {"x": 1}, "b": {"x": 2}, "c": [{"x": 1}, {"x": 2}]})", "file.json"));
}

TEST_CASE("strict json: hostile nesting is refused, however deep, open or closed") {
  const std::string open(1'000'000, '[');
  CHECK(failure_of(open).problem().find("nested deeper") != std::string::npos);
  std::string objects;
  for (int i = 0; i < 100'000; ++i) objects += "{\"a\":";
  CHECK(failure_of(objects).problem().find("nested deeper") != std::string::npos);
  CHECK_NOTHROW(parse_json(std::string(60, '[') + std::string(60, ']'), "file.json"));
}

TEST_CASE("strict json: wrong types and signs are told with their pointer") {
  const auto document = parse_json(
      R"({"n": "4", "z": 0, "m": -1, "t": "", "o": 3, "a": {}, "x/y~": {"k": true}})", "file.json");
  StrictObject object(document, "file.json", "");
  const auto where = [](const auto& action) {
    try {
      action();
    } catch (const Failure& failure) {
      return failure.where() + " | " + failure.problem();
    }
    return std::string();
  };
  CHECK(where([&] { object.number("n"); }) == "file.json: /n | a number is needed, found the text \"4\"");
  CHECK(where([&] { object.positive("z"); }) == "file.json: /z | must be greater than zero, is 0");
  CHECK(where([&] { object.non_negative("m"); }) == "file.json: /m | must not be negative, is -1");
  CHECK(where([&] { object.text("t"); }) == "file.json: /t | text in quotes is needed, found empty text");
  CHECK(where([&] { object.object("o"); }) ==
        "file.json: /o | an object { ... } is needed, found the number 3");
  CHECK(where([&] { object.array("a"); }) == "file.json: /a | an array [ ... ] is needed, found an object");
  CHECK(where([&] { object.number("none"); }) == "file.json: /none | the key \"none\" is missing");
  // RFC 6901: ~ is written ~0 and / is written ~1.
  CHECK(where([&] { object.object("x/y~").number("k"); }) ==
        "file.json: /x~1y~0/k | a number is needed, found true");
  CHECK(where([&] { StrictObject(document["n"], "file.json", ""); }) ==
        "file.json: / | an object { ... } is needed, found the text \"4\"");
}

TEST_CASE("strict json: optional values are there or not, and checked when there") {
  const auto document = parse_json(R"({"a": 2, "b": -1, "o": {"c": "x"}})", "file.json");
  StrictObject object(document, "file.json", "");
  CHECK(object.optional_number("a") == 2.0);
  CHECK_FALSE(object.optional_positive("none"));
  CHECK_FALSE(object.optional_text("none"));
  CHECK_FALSE(object.optional_object("none"));
  CHECK_THROWS_AS(object.optional_non_negative("b"), Failure);
  CHECK(object.optional_object("o")->text("c") == "x");
  CHECK_NOTHROW(object.finish());
}

TEST_CASE("strict json: an unknown key is told with the nearest known one") {
  const auto document = parse_json(R"({"sample_rte": 1})", "file.json");
  StrictObject object(document, "file.json", "/control");
  object.has("latency");
  object.has("sample_rate");
  try {
    object.finish();
    FAIL("no failure");
  } catch (const Failure& failure) {
    CHECK(failure.where() == "file.json: /control/sample_rte");
    CHECK(failure.advice() == "The nearest known key is \"sample_rate\".");
  }
}

TEST_CASE("strict json: a missing key is told with what was written for it, and only then") {
  const auto document = parse_json(R"({"latency_ms": 4, "ki": 1})", "file.json");
  StrictObject object(document, "file.json", "");
  const auto advice = [&object](const std::string& key) {
    try {
      object.number(key);
    } catch (const Failure& failure) {
      return failure.advice();
    }
    return std::string("none thrown");
  };
  CHECK(advice("latency_s") == "\"latency_ms\" is not a known key here: did you mean \"latency_s\"?");
  CHECK(advice("kp").empty());  // ki is a key of its own
}

TEST_CASE("edit distance: known values, symmetry, triangle inequality") {
  CHECK(edit_distance("", "") == 0);
  CHECK(edit_distance("abc", "") == 3);
  CHECK(edit_distance("kitten", "sitting") == 3);  // the textbook pair
  const std::vector<std::string> words{"roll", "pitch", "yaw", "role", "heave", ""};
  for (const auto& a : words) {
    for (const auto& b : words) {
      CHECK(edit_distance(a, b) == edit_distance(b, a));
      CHECK((edit_distance(a, b) == 0) == (a == b));
      for (const auto& c : words) CHECK(edit_distance(a, c) <= edit_distance(a, b) + edit_distance(b, c));
    }
  }
  CHECK(nearest_word("rol", {"roll", "pitch"}) == "roll");
  CHECK(nearest_word("rol", {}).empty());
}
