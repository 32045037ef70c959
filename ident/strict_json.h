// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <cstddef>
#include <nlohmann/json.hpp>
#include <optional>
#include <set>
#include <string>
#include <string_view>
#include <vector>

namespace hoverwright::ident {

/// Text to JSON, `//` comments accepted. @throws Failure (bad_input) with source, line and column of the
/// first error; duplicate keys in one object, numbers beyond the range of a double and nesting deeper than 64
/// are errors too.
nlohmann::json parse_json(std::string_view text, const std::string& source);

/// Reads one JSON object strictly: every key that is present must be asked for, else finish() throws. All
/// messages carry source and JSON pointer (RFC 6901). Usage: construct, take values, call finish(). It refers
/// to `value`, which must outlive it.
class StrictObject {
 public:
  /// @throws Failure (bad_input) if `value` is not an object.
  StrictObject(const nlohmann::json& value, std::string source, std::string pointer);

  bool has(const std::string& key);
  double number(const std::string& key);        ///< finite number, required
  double positive(const std::string& key);      ///< finite and > 0, required
  double non_negative(const std::string& key);  ///< finite and >= 0, required
  std::optional<double> optional_number(const std::string& key);
  std::optional<double> optional_positive(const std::string& key);
  std::optional<double> optional_non_negative(const std::string& key);
  std::string text(const std::string& key);  ///< non-empty string, required
  std::optional<std::string> optional_text(const std::string& key);
  StrictObject object(const std::string& key);  ///< required
  std::optional<StrictObject> optional_object(const std::string& key);
  const nlohmann::json& array(const std::string& key);  ///< required array
  /// Keys in the object, sorted, for maps with free keys. Marks all of them as asked for.
  std::vector<std::string> keys();

  /// @throws Failure naming the unknown key and the nearest one that was asked for.
  void finish();

  [[nodiscard]] const std::string& source() const { return source_; }
  [[nodiscard]] std::string pointer(const std::string& key = "") const;
  /// Throws the bad_input Failure for this place.
  [[noreturn]] void fail(const std::string& key, const std::string& problem,
                         const std::string& advice = "") const;

 private:
  const nlohmann::json& required(const std::string& key);
  const nlohmann::json* present(const std::string& key);
  double checked_number(const nlohmann::json& value, const std::string& key) const;

  const nlohmann::json* value_;
  std::string source_;
  std::string pointer_;
  std::set<std::string> asked_;
};

/// Levenshtein distance: single-character insertions, deletions and replacements that turn one word into the
/// other.
std::size_t edit_distance(std::string_view a, std::string_view b);

/// The candidate with the smallest edit distance (Levenshtein) to `word`; empty if there is none.
std::string nearest_word(std::string_view word, const std::set<std::string>& candidates);

}  // namespace hoverwright::ident
