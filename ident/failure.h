// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <stdexcept>
#include <string>

namespace hoverwright::ident {

/// Why a command cannot give what was asked; decides the exit code of the program.
enum class FailureKind {
  bad_input,       ///< exit 2: a file, a value or an option is wrong
  unsupported,     ///< exit 3: the data do not support the answer asked for
  internal_error,  ///< exit 1: anything else
};

/// The one exception of the project. It carries what is wrong, where it is (file, line or byte, channel, JSON
/// pointer) and what the user can do about it. `where` and `advice` may be empty.
class Failure : public std::runtime_error {
 public:
  Failure(FailureKind kind, std::string problem, std::string where, std::string advice);

  [[nodiscard]] FailureKind kind() const { return kind_; }
  [[nodiscard]] int exit_code() const;
  [[nodiscard]] const std::string& problem() const { return problem_; }
  [[nodiscard]] const std::string& where() const { return where_; }
  [[nodiscard]] const std::string& advice() const { return advice_; }

 private:
  FailureKind kind_;
  std::string problem_;
  std::string where_;
  std::string advice_;
};

}  // namespace hoverwright::ident
