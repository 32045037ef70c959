// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/strict_json.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <iterator>
#include <utility>

#include "ident/failure.h"

namespace hoverwright::ident {
namespace {

using nlohmann::json;

// No file of the project nests deeper than ten; the bound keeps hostile input from growing the parser's
// stack.
constexpr std::size_t kDeepestNesting = 64;

/// "file: line 3, column 7" of a byte offset.
std::string place(std::string_view text, std::size_t byte, const std::string& source) {
  const std::string_view before = text.substr(0, std::min(byte, text.size()));
  const auto line = 1 + std::count(before.begin(), before.end(), '\n');
  const std::size_t line_start = before.rfind('\n') == std::string_view::npos ? 0 : before.rfind('\n') + 1;
  return fmt::format("{}: line {}, column {}", source, line,
                     std::max<std::size_t>(1, before.size() - line_start));
}

/// Bytes that a terminal would not show as themselves become '?'.
std::string printable(std::string_view text) {
  std::string clean(text);
  std::replace_if(
      clean.begin(), clean.end(), [](char c) { return c < ' ' || c == '\x7f'; }, '?');
  return clean;
}

/// What the parser says, without the name of its exception class and the place, which is said in our own way.
std::string parser_words(std::string_view what) {
  if (const auto bracket = what.find("] "); bracket != std::string_view::npos)
    what.remove_prefix(bracket + 2);
  if (what.starts_with("parse error")) {
    if (const auto colon = what.find(": "); colon != std::string_view::npos) what.remove_prefix(colon + 2);
  }
  return printable(what);
}

/// An iterator over the text that tells how far the parser has read, so that a key can be given its line.
class CountingIterator {
 public:
  using iterator_category = std::forward_iterator_tag;
  using value_type = char;
  using difference_type = std::ptrdiff_t;
  using pointer = const char*;
  using reference = const char&;

  CountingIterator() = default;
  CountingIterator(const char* position, const char** furthest) : position_(position), furthest_(furthest) {}
  reference operator*() const { return *position_; }
  CountingIterator& operator++() {
    *furthest_ = ++position_;
    return *this;
  }
  CountingIterator operator++(int) {
    CountingIterator before = *this;
    ++*this;
    return before;
  }
  bool operator==(const CountingIterator& other) const { return position_ == other.position_; }
  bool operator!=(const CountingIterator& other) const { return position_ != other.position_; }

 private:
  const char* position_ = nullptr;
  const char** furthest_ = nullptr;
};

/// Walks the text once for everything that the parser itself would let pass or word badly.
class Checker : public nlohmann::json_sax<json> {
 public:
  Checker(std::string_view text, const std::string& source, const char* const* furthest)
      : text_(text), source_(source), furthest_(furthest) {}

  bool null() override { return true; }
  bool boolean(bool) override { return true; }
  bool number_integer(number_integer_t) override { return true; }
  bool number_unsigned(number_unsigned_t) override { return true; }
  bool number_float(number_float_t, const string_t&) override { return true; }
  bool string(string_t&) override { return true; }
  bool binary(binary_t&) override { return true; }
  bool start_object(std::size_t) override { return open(); }
  bool end_object() override { return close(); }
  bool start_array(std::size_t) override { return open(); }
  bool end_array() override { return close(); }

  bool key(string_t& name) override {
    if (!keys_.back().insert(name).second) {
      fail(static_cast<std::size_t>(*furthest_ - text_.data()),
           fmt::format("the key \"{}\" is there twice", name), "Keep one of them.");
    }
    return true;
  }

  bool parse_error(std::size_t position, const std::string& token, const json::exception& error) override {
    if (dynamic_cast<const json::out_of_range*>(&error) != nullptr) {
      fail(position, fmt::format("the number {} is beyond the range of a double", printable(token)), "");
    }
    fail(position, "not valid JSON: " + parser_words(error.what()),
         "Look for a missing or surplus comma, quote or bracket here or just before.");
  }

 private:
  bool open() {
    keys_.emplace_back();
    if (keys_.size() > kDeepestNesting) {
      fail(static_cast<std::size_t>(*furthest_ - text_.data()),
           fmt::format("brackets nested deeper than {}", kDeepestNesting), "");
    }
    return true;
  }
  bool close() {
    keys_.pop_back();
    return true;
  }
  [[noreturn]] void fail(std::size_t byte, const std::string& problem, const std::string& advice) const {
    throw Failure(FailureKind::bad_input, problem, place(text_, byte, source_), advice);
  }

  std::string_view text_;
  const std::string& source_;
  const char* const* furthest_;
  std::vector<std::set<std::string>> keys_;
};

/// "text", "a number", ... for messages.
std::string kind_of(const json& value) {
  if (value.is_string()) {
    const auto& text = value.get_ref<const std::string&>();
    return text.empty() ? "empty text" : fmt::format("the text \"{}\"", printable(text.substr(0, 40)));
  }
  if (value.is_number()) return fmt::format("the number {}", value.get<double>());
  if (value.is_boolean()) return value.get<bool>() ? "true" : "false";
  if (value.is_null()) return "null";
  return value.is_array() ? "an array" : "an object";
}

/// Whether someone who wrote `written` may well have meant `known`.
bool looks_meant(const std::string& written, const std::string& known) {
  return written.starts_with(known) || known.starts_with(written) ||
         3 * edit_distance(written, known) <= std::max(written.size(), known.size());
}

}  // namespace

json parse_json(std::string_view text, const std::string& source) {
  if (text.find_first_not_of(" \t\r\n") == std::string_view::npos) {
    throw Failure(FailureKind::bad_input, "the file is empty", source, "");
  }
  const char* furthest = text.data();
  Checker checker(text, source, &furthest);
  json::sax_parse(CountingIterator(text.data(), &furthest),
                  CountingIterator(text.data() + text.size(), &furthest), &checker,
                  json::input_format_t::json, /*strict=*/true, /*ignore_comments=*/true);
  return json::parse(text, nullptr, /*allow_exceptions=*/true, /*ignore_comments=*/true);
}

StrictObject::StrictObject(const json& value, std::string source, std::string pointer)
    : value_(&value), source_(std::move(source)), pointer_(std::move(pointer)) {
  if (!value.is_object()) {
    throw Failure(FailureKind::bad_input, "an object { ... } is needed, found " + kind_of(value),
                  source_ + ": " + (pointer_.empty() ? "/" : pointer_), "");
  }
}

std::string StrictObject::pointer(const std::string& key) const {
  if (key.empty()) return pointer_.empty() ? "/" : pointer_;
  std::string text = pointer_ + "/";
  for (const char c : key) {
    if (c == '~') {
      text += "~0";
    } else if (c == '/') {
      text += "~1";
    } else {
      text += c;
    }
  }
  return text;
}

void StrictObject::fail(const std::string& key, const std::string& problem, const std::string& advice) const {
  throw Failure(FailureKind::bad_input, problem, source_ + ": " + pointer(key), advice);
}

const json* StrictObject::present(const std::string& key) {
  asked_.insert(key);
  const auto found = value_->find(key);
  return found == value_->end() ? nullptr : &*found;
}

const json& StrictObject::required(const std::string& key) {
  if (const json* value = present(key)) return *value;
  std::set<std::string> others;
  for (const auto& [name, unused] : value_->items()) {
    if (!asked_.contains(name) && looks_meant(name, key)) others.insert(name);
  }
  const std::string nearest = nearest_word(key, others);
  fail(key, fmt::format("the key \"{}\" is missing", key),
       nearest.empty() ? ""
                       : fmt::format("\"{}\" is not a known key here: did you mean \"{}\"?", nearest, key));
}

double StrictObject::checked_number(const json& value, const std::string& key) const {
  if (!value.is_number()) fail(key, "a number is needed, found " + kind_of(value));
  const double number = value.get<double>();
  if (!std::isfinite(number)) fail(key, "a finite number is needed");
  return number;
}

bool StrictObject::has(const std::string& key) {
  return present(key) != nullptr;
}

double StrictObject::number(const std::string& key) {
  return checked_number(required(key), key);
}

double StrictObject::positive(const std::string& key) {
  const double value = number(key);
  if (!(value > 0.0)) fail(key, fmt::format("must be greater than zero, is {}", value));
  return value;
}

double StrictObject::non_negative(const std::string& key) {
  const double value = number(key);
  if (!(value >= 0.0)) fail(key, fmt::format("must not be negative, is {}", value));
  return value;
}

std::optional<double> StrictObject::optional_number(const std::string& key) {
  if (!has(key)) return std::nullopt;
  return number(key);
}

std::optional<double> StrictObject::optional_positive(const std::string& key) {
  if (!has(key)) return std::nullopt;
  return positive(key);
}

std::optional<double> StrictObject::optional_non_negative(const std::string& key) {
  if (!has(key)) return std::nullopt;
  return non_negative(key);
}

std::string StrictObject::text(const std::string& key) {
  const json& value = required(key);
  if (!value.is_string() || value.get_ref<const std::string&>().empty()) {
    fail(key, "text in quotes is needed, found " + kind_of(value));
  }
  return value.get<std::string>();
}

std::optional<std::string> StrictObject::optional_text(const std::string& key) {
  if (!has(key)) return std::nullopt;
  return text(key);
}

StrictObject StrictObject::object(const std::string& key) {
  return {required(key), source_, pointer(key)};
}

std::optional<StrictObject> StrictObject::optional_object(const std::string& key) {
  if (!has(key)) return std::nullopt;
  return object(key);
}

const json& StrictObject::array(const std::string& key) {
  const json& value = required(key);
  if (!value.is_array()) fail(key, "an array [ ... ] is needed, found " + kind_of(value));
  return value;
}

std::vector<std::string> StrictObject::keys() {
  std::vector<std::string> names;
  for (const auto& [name, unused] : value_->items()) names.push_back(name);
  asked_.insert(names.begin(), names.end());
  return names;
}

void StrictObject::finish() {
  for (const auto& [name, unused] : value_->items()) {
    if (asked_.contains(name)) continue;
    const std::string nearest = nearest_word(name, asked_);
    fail(name, fmt::format("the key \"{}\" is not known here", printable(name)),
         nearest.empty() ? "" : fmt::format("The nearest known key is \"{}\".", nearest));
  }
}

std::size_t edit_distance(std::string_view a, std::string_view b) {
  // One row of the Wagner-Fischer table (J. ACM 21, 1974).
  std::vector<std::size_t> row(b.size() + 1);
  for (std::size_t j = 0; j <= b.size(); ++j) row[j] = j;
  for (std::size_t i = 1; i <= a.size(); ++i) {
    std::size_t diagonal = row[0];
    row[0] = i;
    for (std::size_t j = 1; j <= b.size(); ++j) {
      const std::size_t replaced = diagonal + (a[i - 1] == b[j - 1] ? 0 : 1);
      diagonal = row[j];
      row[j] = std::min({replaced, row[j] + 1, row[j - 1] + 1});
    }
  }
  return row[b.size()];
}

std::string nearest_word(std::string_view word, const std::set<std::string>& candidates) {
  // A hostile word of megabytes is not worth comparing letter by letter.
  const std::string_view start = word.substr(0, 200);
  const auto nearest = std::min_element(
      candidates.begin(), candidates.end(),
      [start](const auto& a, const auto& b) { return edit_distance(start, a) < edit_distance(start, b); });
  return nearest == candidates.end() ? std::string() : *nearest;
}

}  // namespace hoverwright::ident
