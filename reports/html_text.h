// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <map>
#include <string>
#include <string_view>

namespace hoverwright::reports {

/// Text safe between tags and inside quoted attributes.
std::string html_escaped(std::string_view text);

/// JSON text safe inside a script element: every `<` becomes \u003c, so neither `</script>` nor `<!--` can
/// appear.
std::string script_escaped(std::string_view json);

/// Fills {{name}} places; one pass, so that filled-in text is never searched. @throws Failure
/// (internal_error) for an unknown place.
std::string filled(std::string_view text, const std::map<std::string, std::string_view>& values);

/// Value with `digits` significant digits, plain notation for everyday sizes, a true minus sign; "–" when not
/// finite.
std::string shown(double value, int digits = 3);

/// A number a person set (a gain, a rate, a limit): up to four significant digits, no trailing zeros.
std::string shown_setting(double value);

/// `text` as a sentence of its own: first letter upper case, a full stop at the end. Empty stays empty.
std::string as_sentence(std::string text);

/// Value with fixed decimals and a true minus sign; "–" when not finite.
std::string shown_fixed(double value, int decimals);

/// Value and 95 % limits with as many decimals as the interval deserves (two significant digits of its half
/// width).
struct ShownInterval {
  std::string value, low, high;
};
ShownInterval shown_interval(double value, double low, double high);

/// "s" is shown as milliseconds, "^2" as a superscript.
struct ShownUnit {
  std::string text;
  double factor = 1.0;
};
ShownUnit shown_unit(std::string_view unit);

}  // namespace hoverwright::reports
