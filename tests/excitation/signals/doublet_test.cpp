// SPDX-License-Identifier: GPL-3.0-or-later
#include "excitation/signals/doublet.h"

#include <catch2/catch.hpp>
#include <limits>

#include "ident/failure.h"

namespace hoverwright::excitation {

TEST_CASE("doublet: up, down, zero outside") {
  const Doublet doublet{0.04, 0.8};
  CHECK_NOTHROW(doublet.check());
  CHECK(doublet.value(-0.001) == 0.0);
  CHECK(doublet.value(0.0) == 0.04);
  CHECK(doublet.value(0.399) == 0.04);
  CHECK(doublet.value(0.4) == -0.04);
  CHECK(doublet.value(0.799) == -0.04);
  CHECK(doublet.value(0.8) == 0.0);
  CHECK(doublet.value(5.0) == 0.0);
}

TEST_CASE("doublet: sampled anywhere in a flight, its halves cancel exactly") {
  for (const double rate_hz : {250.0, 400.0, 1000.0, 333.0}) {
    const int half = static_cast<int>(0.4 * rate_hz);
    const Doublet doublet{0.04, 2.0 * half / rate_hz};
    for (int first = 1; first < 300000; first += 7919) {
      const double start_s = first / rate_hz;
      int up = 0;
      int down = 0;
      for (int k = first - 5; k < first + 2 * half + 5; ++k) {
        const double value = doublet.value(k / rate_hz - start_s);
        up += value > 0.0 ? 1 : 0;
        down += value < 0.0 ? 1 : 0;
      }
      REQUIRE(up == half);
      REQUIRE(down == half);
    }
  }
}

TEST_CASE("doublet: impossible values are refused and the member is named") {
  const double nan = std::numeric_limits<double>::quiet_NaN();
  for (const double bad : {0.0, -0.1, nan}) {
    CHECK_THROWS_WITH((Doublet{bad, 0.8}.check()), Catch::StartsWith("amplitude: "));
    CHECK_THROWS_WITH((Doublet{0.04, bad}.check()), Catch::StartsWith("duration_s: "));
    CHECK_THROWS_AS((Doublet{bad, bad}.check()), ident::Failure);
  }
}

}  // namespace hoverwright::excitation
