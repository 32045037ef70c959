// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/html_text.h"

#include <catch2/catch.hpp>
#include <limits>

#include "ident/failure.h"

using namespace hoverwright::reports;

TEST_CASE("html text: nothing a name holds can end a tag, an attribute or a script") {
  CHECK(html_escaped("<b>\"a\" & 'b'</b>") == "&lt;b&gt;&quot;a&quot; &amp; &#39;b&#39;&lt;/b&gt;");
  CHECK(script_escaped("[\"</script><!--\"]") == "[\"\\u003c/script>\\u003c!--\"]");
}

TEST_CASE("html text: places are filled once, unknown ones are refused") {
  CHECK(filled("{{a}}-{{b}}-{{a}}", {{"a", "{{b}}"}, {"b", "2"}}) == "{{b}}-2-{{b}}");
  CHECK(filled("no places }}", {}) == "no places }}");
  CHECK_THROWS_AS(filled("{{c}}", {{"a", "1"}}), hoverwright::ident::Failure);
}

TEST_CASE("html text: numbers with the digits they deserve") {
  CHECK(shown(271.34) == "271");
  CHECK(shown(0.045123) == "0.0451");
  CHECK(shown(-3.2, 2) == "\u22123.2");
  CHECK(shown(0.0) == "0");
  CHECK(shown(std::numeric_limits<double>::quiet_NaN()) == "\u2013");
  CHECK(shown_fixed(-0.04, 1) == "0.0");
  const ShownInterval interval = shown_interval(271.34, 261.9, 281.2);
  CHECK(interval.value == "271.3");
  CHECK(interval.low == "261.9");
  CHECK(interval.high == "281.2");
  CHECK(shown_interval(271.34, 131.9, 481.2).value == "271");
  CHECK(shown_interval(1.0, 0.1, std::numeric_limits<double>::infinity()).high == "\u2013");
  CHECK(shown_unit("s").text == "ms");
  CHECK(shown_unit("s").factor == 1000.0);
  CHECK(shown_unit("rad/s^2").text == "rad/s\u00b2");
}
