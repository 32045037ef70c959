// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <cstdint>
#include <nlohmann/json.hpp>
#include <string>
#include <string_view>
#include <vector>

#include "ident/strict_json.h"
#include "reports/result_files.h"

// Shared by the writers and readers of the result files; no other room includes this.
//
// A number that is not finite cannot stand in JSON: it is written as null and read back as NaN. So null in an
// array (or for a standard error, an interval's end, ...) means "not defined at this point", never zero.

namespace hoverwright::reports {

using OrderedJson = nlohmann::ordered_json;

inline constexpr std::string_view kResponsesFormat = "hoverwright.responses/1";
inline constexpr std::string_view kModelsFormat = "hoverwright.models/1";
inline constexpr std::string_view kGainsFormat = "hoverwright.gains/1";

/// The number, or null when it is not finite.
OrderedJson number_json(double value);
OrderedJson array_json(const Eigen::VectorXd& values);
OrderedJson real_json(const Eigen::VectorXcd& values);
OrderedJson imag_json(const Eigen::VectorXcd& values);
OrderedJson matrix_json(const Eigen::MatrixXd& values);  ///< array of rows

/// Format tag, provenance and vehicle name: the head of every result file.
OrderedJson file_head(std::string_view format, const std::string& vehicle_name, const Provenance& provenance);

/// Objects one key per line, arrays of plain numbers or words on one line, shortest text that reads back to
/// the same doubles.
std::string result_text(const OrderedJson& value);

/// One object of a result file: ident::StrictObject plus the kinds of value only result files hold. Every key
/// present must be read before finish(). All failures are bad_input with file and JSON pointer.
class ResultObject {
 public:
  ResultObject(const nlohmann::json& value, const std::string& source, const std::string& pointer = "");

  bool has(const std::string& key) { return strict_.has(key); }
  std::string text(const std::string& key) { return strict_.text(key); }
  std::string text_or_empty(const std::string& key);  ///< required, may be ""
  bool boolean(const std::string& key);
  double finite(const std::string& key) { return strict_.number(key); }
  double number(const std::string& key);  ///< null reads as NaN
  int count(const std::string& key);      ///< whole number >= 0
  std::uint64_t seed(const std::string& key);
  ResultObject object(const std::string& key);
  std::vector<std::string> keys();
  std::vector<std::string> texts(const std::string& key);
  /// Array of numbers; `size` < 0: any length.
  Eigen::VectorXd numbers(const std::string& key, Eigen::Index size = -1);
  Eigen::VectorXcd complex_numbers(const std::string& real_key, const std::string& imag_key,
                                   Eigen::Index size);
  Eigen::MatrixXd square_matrix(const std::string& key, Eigen::Index size);
  /// The elements of an array of objects.
  std::vector<ResultObject> objects(const std::string& key);

  void finish() { strict_.finish(); }
  [[noreturn]] void fail(const std::string& key, const std::string& problem,
                         const std::string& advice = "") const {
    strict_.fail(key, problem, advice);
  }

 private:
  const nlohmann::json& required(const std::string& key);

  const nlohmann::json* value_;
  ident::StrictObject strict_;
};

struct FileHead {
  std::string vehicle_name;
  Provenance provenance;
};

/// Reads what file_head wrote and checks the format tag.
FileHead read_head(ResultObject& file, std::string_view format);

}  // namespace hoverwright::reports
