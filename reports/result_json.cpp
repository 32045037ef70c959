// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/result_json.h"

#include <fmt/format.h>

#include <cmath>
#include <limits>

#include "ident/failure.h"

namespace hoverwright::reports {
namespace {

bool on_one_line(const OrderedJson& value) {
  if (!value.is_array()) return !value.is_object() || value.empty();
  for (const OrderedJson& element : value) {
    if (element.is_structured()) return false;
  }
  return true;
}

void append_text(const OrderedJson& value, std::size_t depth, std::string& text) {
  if (on_one_line(value)) {
    text += value.dump();
    return;
  }
  const std::string indent(2 * (depth + 1), ' ');
  const bool is_object = value.is_object();
  text += is_object ? "{\n" : "[\n";
  bool first = true;
  for (const auto& [key, element] : value.items()) {
    if (!first) text += ",\n";
    first = false;
    text += indent;
    if (is_object) text += OrderedJson(key).dump() + ": ";
    append_text(element, depth + 1, text);
  }
  text += "\n" + std::string(2 * depth, ' ') + (is_object ? "}" : "]");
}

double number_of(const nlohmann::json& value) {
  return value.is_null() ? std::numeric_limits<double>::quiet_NaN() : value.get<double>();
}

}  // namespace

OrderedJson number_json(double value) {
  return std::isfinite(value) ? OrderedJson(value) : OrderedJson(nullptr);
}

OrderedJson array_json(const Eigen::VectorXd& values) {
  OrderedJson array = OrderedJson::array();
  for (const double value : values) array.push_back(number_json(value));
  return array;
}

OrderedJson real_json(const Eigen::VectorXcd& values) {
  return array_json(values.real());
}
OrderedJson imag_json(const Eigen::VectorXcd& values) {
  return array_json(values.imag());
}

OrderedJson matrix_json(const Eigen::MatrixXd& values) {
  OrderedJson rows = OrderedJson::array();
  for (Eigen::Index row = 0; row < values.rows(); ++row) rows.push_back(array_json(values.row(row)));
  return rows;
}

OrderedJson file_head(std::string_view format, const std::string& vehicle_name,
                      const Provenance& provenance) {
  OrderedJson inputs = OrderedJson::object();
  for (const auto& [name, hash] : provenance.inputs) inputs[name] = hash;
  OrderedJson head;
  head["format"] = format;
  head["vehicle"] = vehicle_name;
  head["provenance"] = {
      {"program_version", provenance.program_version}, {"command", provenance.command}, {"inputs", inputs}};
  return head;
}

std::string result_text(const OrderedJson& value) {
  std::string text;
  append_text(value, 0, text);
  return text + "\n";
}

ResultObject::ResultObject(const nlohmann::json& value, const std::string& source, const std::string& pointer)
    : value_(&value), strict_(value, source, pointer) {}

const nlohmann::json& ResultObject::required(const std::string& key) {
  if (!strict_.has(key)) strict_.fail(key, fmt::format("the key \"{}\" is missing", key));
  return value_->at(key);
}

std::string ResultObject::text_or_empty(const std::string& key) {
  const nlohmann::json& value = required(key);
  if (!value.is_string()) strict_.fail(key, "expected a string");
  return value.get<std::string>();
}

bool ResultObject::boolean(const std::string& key) {
  const nlohmann::json& value = required(key);
  if (!value.is_boolean()) strict_.fail(key, "expected true or false");
  return value.get<bool>();
}

double ResultObject::number(const std::string& key) {
  const nlohmann::json& value = required(key);
  if (!value.is_number() && !value.is_null()) strict_.fail(key, "expected a number or null");
  return number_of(value);
}

int ResultObject::count(const std::string& key) {
  const std::uint64_t value = seed(key);
  if (value > static_cast<std::uint64_t>(std::numeric_limits<int>::max()))
    strict_.fail(key, "the number is too large");
  return static_cast<int>(value);
}

std::uint64_t ResultObject::seed(const std::string& key) {
  const nlohmann::json& value = required(key);
  if (!value.is_number_unsigned()) strict_.fail(key, "expected a whole number, zero or more");
  return value.get<std::uint64_t>();
}

ResultObject ResultObject::object(const std::string& key) {
  return ResultObject(required(key), strict_.source(), strict_.pointer(key));
}

std::vector<std::string> ResultObject::keys() {
  return strict_.keys();
}

std::vector<std::string> ResultObject::texts(const std::string& key) {
  std::vector<std::string> texts;
  for (const nlohmann::json& element : strict_.array(key)) {
    if (!element.is_string()) strict_.fail(key, fmt::format("element {}: expected a string", texts.size()));
    texts.push_back(element.get<std::string>());
  }
  return texts;
}

Eigen::VectorXd ResultObject::numbers(const std::string& key, Eigen::Index size) {
  const nlohmann::json& array = strict_.array(key);
  const Eigen::Index found = static_cast<Eigen::Index>(array.size());
  if (size >= 0 && found != size) strict_.fail(key, fmt::format("{} numbers where {} belong", found, size));
  Eigen::VectorXd values(found);
  for (Eigen::Index i = 0; i < found; ++i) {
    const nlohmann::json& element = array[static_cast<std::size_t>(i)];
    if (!element.is_number() && !element.is_null())
      strict_.fail(key, fmt::format("element {}: expected a number or null", i));
    values(i) = number_of(element);
  }
  return values;
}

Eigen::VectorXcd ResultObject::complex_numbers(const std::string& real_key, const std::string& imag_key,
                                               Eigen::Index size) {
  Eigen::VectorXcd values(size);
  values.real() = numbers(real_key, size);
  values.imag() = numbers(imag_key, size);
  return values;
}

Eigen::MatrixXd ResultObject::square_matrix(const std::string& key, Eigen::Index size) {
  const nlohmann::json& rows = strict_.array(key);
  if (static_cast<Eigen::Index>(rows.size()) != size)
    strict_.fail(key, fmt::format("{} rows where {} belong", rows.size(), size));
  Eigen::MatrixXd matrix(size, size);
  for (Eigen::Index row = 0; row < size; ++row) {
    const nlohmann::json& values = rows[static_cast<std::size_t>(row)];
    if (!values.is_array() || static_cast<Eigen::Index>(values.size()) != size) {
      strict_.fail(key, fmt::format("row {}: expected an array of {} numbers", row, size));
    }
    for (Eigen::Index column = 0; column < size; ++column) {
      const nlohmann::json& element = values[static_cast<std::size_t>(column)];
      if (!element.is_number() && !element.is_null()) {
        strict_.fail(key, fmt::format("row {}, column {}: expected a number or null", row, column));
      }
      matrix(row, column) = number_of(element);
    }
  }
  return matrix;
}

std::vector<ResultObject> ResultObject::objects(const std::string& key) {
  std::vector<ResultObject> elements;
  for (const nlohmann::json& element : strict_.array(key)) {
    elements.emplace_back(element, strict_.source(),
                          fmt::format("{}/{}", strict_.pointer(key), elements.size()));
  }
  return elements;
}

FileHead read_head(ResultObject& file, std::string_view format) {
  FileHead head;
  const std::string found = file.text("format");
  if (found != format) {
    file.fail("format", fmt::format("format is \"{}\", expected \"{}\"", found, format),
              "Write the file again with this version of the program.");
  }
  head.vehicle_name = file.text_or_empty("vehicle");
  ResultObject provenance = file.object("provenance");
  head.provenance.program_version = provenance.text_or_empty("program_version");
  head.provenance.command = provenance.text_or_empty("command");
  ResultObject inputs = provenance.object("inputs");
  for (const std::string& name : inputs.keys()) head.provenance.inputs[name] = inputs.text(name);
  provenance.finish();
  return head;
}

}  // namespace hoverwright::reports
