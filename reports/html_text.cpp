// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/html_text.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "ident/failure.h"

namespace hoverwright::reports {
namespace {

constexpr const char* kMinus = "\u2212";
constexpr const char* kUndefined = "\u2013";

std::string with_true_minus(std::string text) {
  // "-0.0" is a rounding of nothing; a sign would be read as one.
  const bool zero = text.find_first_of("123456789") == std::string::npos;
  if (!text.empty() && text.front() == '-') text.replace(0, 1, zero ? "" : kMinus);
  return text;
}

std::string replaced(std::string text, std::string_view from, std::string_view to) {
  for (std::size_t at = text.find(from); at != std::string::npos; at = text.find(from, at + to.size())) {
    text.replace(at, from.size(), to);
  }
  return text;
}

int exponent_of(double value) {
  return static_cast<int>(std::floor(std::log10(std::abs(value))));
}

}  // namespace

std::string html_escaped(std::string_view text) {
  std::string escaped;
  escaped.reserve(text.size());
  for (const char c : text) {
    switch (c) {
      case '&':
        escaped += "&amp;";
        break;
      case '<':
        escaped += "&lt;";
        break;
      case '>':
        escaped += "&gt;";
        break;
      case '"':
        escaped += "&quot;";
        break;
      case '\'':
        escaped += "&#39;";
        break;
      default:
        escaped += c;
    }
  }
  return escaped;
}

std::string script_escaped(std::string_view json) {
  return replaced(std::string(json), "<", "\\u003c");
}

std::string filled(std::string_view text, const std::map<std::string, std::string_view>& values) {
  std::string result;
  while (true) {
    const std::size_t open = text.find("{{");
    const std::size_t close = open == std::string_view::npos ? open : text.find("}}", open);
    if (close == std::string_view::npos) return result.append(text);
    const auto value = values.find(std::string(text.substr(open + 2, close - open - 2)));
    if (value == values.end()) {
      throw ident::Failure(ident::FailureKind::internal_error, "the page template names an unknown place",
                           std::string(text.substr(open, close + 2 - open)), "");
    }
    result.append(text.substr(0, open)).append(value->second);
    text.remove_prefix(close + 2);
  }
}

std::string shown(double value, int digits) {
  if (!std::isfinite(value)) return kUndefined;
  if (value == 0.0) return "0";
  const int exponent = exponent_of(value);
  if (exponent < -5 || exponent > 6) return with_true_minus(fmt::format("{:.{}g}", value, digits));
  return with_true_minus(fmt::format("{:.{}f}", value, std::max(0, digits - 1 - exponent)));
}

std::string shown_setting(double value) {
  return std::isfinite(value) ? with_true_minus(fmt::format("{:.4g}", value)) : kUndefined;
}

std::string as_sentence(std::string text) {
  if (text.empty()) return text;
  if (text.front() >= 'a' && text.front() <= 'z') text.front() = static_cast<char>(text.front() - 'a' + 'A');
  if (std::string_view(".!?").find(text.back()) == std::string_view::npos) text += '.';
  return text;
}

std::string shown_fixed(double value, int decimals) {
  if (!std::isfinite(value)) return kUndefined;
  return with_true_minus(fmt::format("{:.{}f}", value, decimals));
}

ShownInterval shown_interval(double value, double low, double high) {
  const double half_width = std::abs(high - low) / 2.0;
  if (!std::isfinite(half_width) || half_width == 0.0 || !std::isfinite(value)) {
    return {shown(value, 4), shown(low, 4), shown(high, 4)};
  }
  const int exponent = exponent_of(half_width);
  if (exponent < -6 || exponent > 6) return {shown(value, 4), shown(low, 4), shown(high, 4)};
  const int decimals = std::max(0, 1 - exponent);
  return {shown_fixed(value, decimals), shown_fixed(low, decimals), shown_fixed(high, decimals)};
}

ShownUnit shown_unit(std::string_view unit) {
  if (unit == "s") return {"ms", 1000.0};
  if (unit == "1") return {"", 1.0};
  std::string text = replaced(replaced(std::string(unit), "^2", "\u00b2"), "^3", "\u00b3");
  return {text, 1.0};
}

}  // namespace hoverwright::reports
