// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/failure.h"

#include <utility>

namespace hoverwright::ident {
namespace {

std::string one_line(const std::string& problem, const std::string& where, const std::string& advice) {
  std::string text = where.empty() ? problem : where + ": " + problem;
  if (!advice.empty()) text += "\n  " + advice;
  return text;
}

}  // namespace

Failure::Failure(FailureKind kind, std::string problem, std::string where, std::string advice)
    : std::runtime_error(one_line(problem, where, advice)),
      kind_(kind),
      problem_(std::move(problem)),
      where_(std::move(where)),
      advice_(std::move(advice)) {}

int Failure::exit_code() const {
  switch (kind_) {
    case FailureKind::bad_input:
      return 2;
    case FailureKind::unsupported:
      return 3;
    case FailureKind::internal_error:
      break;
  }
  return 1;
}

}  // namespace hoverwright::ident
