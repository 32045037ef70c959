// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/failure.h"

#include <catch2/catch.hpp>
#include <string>

using namespace hoverwright::ident;

TEST_CASE("failure: the text holds place, problem and advice, in that order") {
  CHECK(std::string(Failure(FailureKind::bad_input, "what", "where", "advice").what()) ==
        "where: what\n  advice");
  CHECK(std::string(Failure(FailureKind::bad_input, "what", "", "").what()) == "what");
  CHECK(std::string(Failure(FailureKind::bad_input, "what", "where", "").what()) == "where: what");
}

TEST_CASE("failure: kinds become exit codes") {
  CHECK(Failure(FailureKind::bad_input, "", "", "").exit_code() == 2);
  CHECK(Failure(FailureKind::unsupported, "", "", "").exit_code() == 3);
  CHECK(Failure(FailureKind::internal_error, "", "", "").exit_code() == 1);
}
