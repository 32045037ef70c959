// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/csv_reader.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <cstdlib>
#include <limits>
#include <optional>
#include <set>
#include <string_view>

#include "ident/failure.h"
#include "ident/files.h"
#include "ident/strict_json.h"

namespace hoverwright::ident {
namespace {

constexpr double kMissing = std::numeric_limits<double>::quiet_NaN();

/// Takes lines off the text and knows their numbers.
class Lines {
 public:
  Lines(std::string_view text, std::string source) : rest_(text), source_(std::move(source)) {}

  /// Next line that is not blank, without its end; nothing at the end of the text.
  std::optional<std::string_view> next() {
    while (!rest_.empty()) {
      const std::size_t end = rest_.find('\n');
      std::string_view line = rest_.substr(0, end);
      ended_ = end != std::string_view::npos;
      rest_.remove_prefix(ended_ ? end + 1 : rest_.size());
      ++number_;
      if (line.ends_with('\r')) line.remove_suffix(1);
      if (line.find_first_not_of(" \t\r") != std::string_view::npos) return line;
    }
    return std::nullopt;
  }

  [[noreturn]] void fail(const std::string& problem, const std::string& advice) const {
    throw Failure(FailureKind::bad_input, problem, fmt::format("{}: line {}", source_, number_), advice);
  }
  /// Whether the line last taken ended in a line break; the last line of a log that was cut off does not.
  [[nodiscard]] bool ended() const { return ended_; }
  [[nodiscard]] std::string_view rest() const { return rest_; }

 private:
  std::string_view rest_;
  std::string source_;
  long number_ = 0;
  bool ended_ = true;
};

std::string_view trim(std::string_view cell) {
  while (!cell.empty() && (cell.front() == ' ' || cell.front() == '\t')) cell.remove_prefix(1);
  while (!cell.empty() && (cell.back() == ' ' || cell.back() == '\t')) cell.remove_suffix(1);
  return cell;
}

/// Takes one cell off the line, quotes still around it; `more` tells whether a delimiter followed.
std::string_view take_cell(std::string_view& line, char delimiter, bool& more, const Lines& lines) {
  std::size_t end = 0;
  while (end < line.size() && line[end] == ' ') ++end;
  if (end < line.size() && line[end] == '"') {
    // Inside quotes a doubled quote stands for itself (RFC 4180), so skipping pairs of quotes finds the end.
    bool closed = false;
    while (!closed) {
      end = line.find('"', end + 1);
      if (end == std::string_view::npos) {
        lines.fail("a quote is opened and not closed on this line", "Quoted cells must end on their line.");
      }
      closed = end + 1 == line.size() || line[end + 1] != '"';
      if (!closed) ++end;
    }
  }
  end = line.find(delimiter, end);
  more = end != std::string_view::npos;
  const std::string_view cell = trim(line.substr(0, end));
  line.remove_prefix(more ? end + 1 : line.size());
  return cell;
}

bool quoted(std::string_view cell) {
  return cell.size() >= 2 && cell.front() == '"' && cell.back() == '"';
}

std::string unquoted(std::string_view cell) {
  if (!quoted(cell)) return std::string(cell);
  cell = cell.substr(1, cell.size() - 2);
  std::string text;
  for (std::size_t i = 0; i < cell.size(); ++i) {
    text += cell[i];
    if (cell[i] == '"' && i + 1 < cell.size() && cell[i + 1] == '"') ++i;
  }
  return std::string(trim(text));
}

/// The number in the cell, NaN if there is none. A number that a double cannot hold counts as none; one that
/// is too small is 0.
double number_in(std::string_view cell) {
  if (quoted(cell)) cell = trim(cell.substr(1, cell.size() - 2));
  if (cell.starts_with('+')) cell.remove_prefix(1);
  double value = 0.0;
  const auto [end, error] = std::from_chars(cell.data(), cell.data() + cell.size(), value);
  if (error == std::errc::result_out_of_range) value = std::strtod(std::string(cell).c_str(), nullptr);
  if (error == std::errc::invalid_argument || end != cell.data() + cell.size()) return kMissing;
  return std::isfinite(value) ? value : kMissing;
}

/// "12,5": digits, one comma, digits.
bool decimal_comma(std::string_view cell) {
  if (quoted(cell)) cell = cell.substr(1, cell.size() - 2);
  const std::size_t comma = cell.find(',');
  if (comma == 0 || comma == std::string_view::npos || comma + 1 == cell.size()) return false;
  std::string with_point(cell);
  with_point[comma] = '.';
  return !std::isnan(number_in(with_point));
}

/// The most frequent of the three delimiters outside quotes.
char delimiter_of(std::string_view header, const Lines& lines) {
  constexpr std::string_view kDelimiters = ",;\t";
  std::array<long, 3> counts{};
  bool inside_quotes = false;
  for (const char c : header) {
    if (c == '"') inside_quotes = !inside_quotes;
    const std::size_t which = kDelimiters.find(c);
    if (!inside_quotes && which != std::string_view::npos) ++counts[which];
  }
  const auto most = std::max_element(counts.begin(), counts.end());
  if (*most == 0) {
    lines.fail(
        "the header row has one column only",
        "Column names are separated by comma, semicolon or tab; a log needs time and at least one signal.");
  }
  return kDelimiters[static_cast<std::size_t>(most - counts.begin())];
}

std::vector<std::string> read_header(std::string_view header, char delimiter, const Lines& lines) {
  std::vector<std::string> names;
  std::set<std::string> seen;
  bool all_numbers = true;
  for (bool more = true; more;) {
    names.push_back(unquoted(take_cell(header, delimiter, more, lines)));
    const std::string& name = names.back();
    if (name.empty()) {
      lines.fail(fmt::format("column {} of the header row has no name", names.size()),
                 "Name every column; a delimiter at the end of the row counts as one more column.");
    }
    if (!seen.insert(name).second) {
      lines.fail(fmt::format("the column name \"{}\" is there twice", name),
                 "Rename or remove one of the two.");
    }
    all_numbers = all_numbers && !std::isnan(number_in(name));
  }
  if (all_numbers) lines.fail("the first row holds numbers", "A header row with the column names is needed.");
  return names;
}

void check_text(std::string_view text, const std::string& source) {
  if (text.find_first_not_of(" \t\r\n") == std::string_view::npos) {
    throw Failure(FailureKind::bad_input, "the log is empty", source, "");
  }
  if (const std::size_t zero = text.find('\0'); zero != std::string_view::npos) {
    throw Failure(FailureKind::bad_input, "this is not a text file: it holds a zero byte",
                  fmt::format("{}: byte {}", source, zero), "Export the log as CSV text in UTF-8.");
  }
  const std::string_view header = text.substr(0, text.find('\n'));
  const auto control = [](char c) { return (c >= 0 && c < ' ' && c != '\t' && c != '\r') || c == '\x7f'; };
  if (std::any_of(header.begin(), header.end(), control)) {
    throw Failure(FailureKind::bad_input, "this is not a text file: its first line holds control characters",
                  source, "Export the log as CSV text in UTF-8.");
  }
}

[[noreturn]] void fail_cell_count(const Lines& lines, std::size_t found, std::size_t expected) {
  lines.fail(fmt::format("{}{} cells where the header has {} columns", found > expected ? "more than " : "",
                         std::min(found, expected), expected),
             lines.ended()
                 ? "Every row needs as many cells as the header; numbers are written with a decimal point."
                 : "The log was cut off while it was written: delete its last line.");
}

}  // namespace

std::size_t LogTable::find(const std::string& name) const {
  const auto found = std::find(names.begin(), names.end(), name);
  if (found != names.end()) return static_cast<std::size_t>(found - names.begin());
  throw Failure(
      FailureKind::bad_input, fmt::format("no column \"{}\"", name), source.string(),
      fmt::format("The nearest column name is \"{}\".", nearest_word(name, {names.begin(), names.end()})));
}

LogTable read_csv(const std::filesystem::path& path) {
  const std::string content = read_file(path);
  std::string_view text = content;
  if (text.starts_with("\xEF\xBB\xBF")) text.remove_prefix(3);
  check_text(text, path.string());

  Lines lines(text, path.string());
  const std::string_view header = *lines.next();  // there is one: the text is not blank
  const char delimiter = delimiter_of(header, lines);
  LogTable log;
  log.source = path;
  log.names = read_header(header, delimiter, lines);
  const std::size_t width = log.names.size();

  // A row takes at least one byte per column, which bounds the rows whatever the line breaks claim.
  const std::string_view data = lines.rest();
  const auto breaks = static_cast<std::size_t>(std::count(data.begin(), data.end(), '\n'));
  const auto most_rows = static_cast<Eigen::Index>(std::min(breaks, data.size() / width) + 1);
  log.columns.assign(width, Eigen::VectorXd(most_rows));
  log.missing_cells.assign(width, 0);

  Eigen::Index row = 0;
  while (auto line = lines.next()) {
    std::size_t column = 0;
    for (bool more = true; more; ++column) {
      const std::string_view cell = take_cell(*line, delimiter, more, lines);
      if (column == width) fail_cell_count(lines, width + 1, width);
      const double value = number_in(cell);
      if (std::isnan(value)) {
        if (decimal_comma(cell)) {
          lines.fail(
              fmt::format("\"{}\" in column \"{}\" is written with a decimal comma", cell, log.names[column]),
              "Export the log with decimal points: 1.5, not 1,5.");
        }
        ++log.missing_cells[column];
      }
      log.columns[column][row] = value;
    }
    if (column < width) fail_cell_count(lines, column, width);
    ++row;
  }
  if (row == 0) lines.fail("there is a header row and no data", "");
  for (Eigen::VectorXd& values : log.columns) values.conservativeResize(row);
  return log;
}

}  // namespace hoverwright::ident
