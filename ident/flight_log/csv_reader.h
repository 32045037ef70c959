// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <Eigen/Core>
#include <filesystem>
#include <string>
#include <vector>

namespace hoverwright::ident {

/// A log as columns of numbers of one length; a missing or non-numeric cell is NaN and is counted.
struct LogTable {
  std::filesystem::path source;
  std::vector<std::string> names;
  std::vector<Eigen::VectorXd> columns;
  std::vector<long> missing_cells;  ///< per column

  /// Column index; @throws Failure (bad_input) naming the column and the nearest one that exists.
  [[nodiscard]] std::size_t find(const std::string& name) const;
};

/// One header row, then numbers; comma, semicolon or tab, found from the header; quoted names; CRLF and UTF-8
/// byte order mark accepted; blank lines skipped. Epoch times keep their full double precision.
/// @throws Failure (bad_input) with file and line: empty file, duplicate or empty column names, a row with
/// another number of cells, decimal commas (with advice), no data rows.
LogTable read_csv(const std::filesystem::path& path);

}  // namespace hoverwright::ident
