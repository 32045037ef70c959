// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/flight_log/role_guess.h"

#include <algorithm>
#include <cctype>
#include <initializer_list>
#include <vector>

namespace hoverwright::ident {
namespace {

/// Lower-case words of a name: runs of letters, and runs of digits.
std::vector<std::string> words_of(std::string_view name) {
  std::vector<std::string> words;
  int last_kind = 0;
  for (const char c : name) {
    const auto byte = static_cast<unsigned char>(c);
    const int kind = std::isalpha(byte) != 0 ? 1 : (std::isdigit(byte) != 0 ? 2 : 0);
    if (kind != 0 && kind == last_kind) {
      words.back() += static_cast<char>(std::tolower(byte));
    } else if (kind != 0) {
      words.emplace_back(1, static_cast<char>(std::tolower(byte)));
    }
    last_kind = kind;
  }
  return words;
}

bool has_word(const std::vector<std::string>& words, std::initializer_list<std::string_view> wanted) {
  return std::any_of(words.begin(), words.end(), [wanted](const std::string& word) {
    return std::find(wanted.begin(), wanted.end(), word) != wanted.end();
  });
}

bool has_start(const std::vector<std::string>& words, std::initializer_list<std::string_view> starts) {
  return std::any_of(words.begin(), words.end(), [starts](const std::string& word) {
    return std::any_of(starts.begin(), starts.end(),
                       [&word](std::string_view start) { return word.starts_with(start); });
  });
}

/// The axis a name speaks of by its own name.
std::optional<std::string> named_axis(const std::vector<std::string>& words) {
  if (has_word(words, {"roll"})) return "roll";
  if (has_word(words, {"pitch"})) return "pitch";
  if (has_word(words, {"yaw"})) return "yaw";
  if (has_word(words, {"heave", "thrust", "throttle", "collective"})) return "heave";
  return std::nullopt;
}

std::optional<std::string> rate_axis(const std::vector<std::string>& words) {
  if (has_word(words, {"x", "p", "0", "roll"})) return "roll";
  if (has_word(words, {"y", "q", "1", "pitch"})) return "pitch";
  if (has_word(words, {"z", "r", "2", "yaw"})) return "yaw";
  return std::nullopt;
}

}  // namespace

std::optional<std::string> guess_role(std::string_view column) {
  const std::vector<std::string> words = words_of(column);
  // Set points and what an estimator made of the sensors are none of the roles.
  if (has_start(words, {"setpoint", "target", "desired", "reference"}) || has_word(words, {"sp", "est"})) {
    return std::nullopt;
  }
  if (has_start(words, {"time", "timestamp"}) || (words.size() == 1 && words[0] == "t")) return "time";
  const auto axis = named_axis(words);
  if (axis && has_start(words, {"excit", "inject", "chirp", "sweep"})) return *axis + " excitation";
  if (axis && has_start(words, {"demand", "cmd", "command", "control", "ctrl", "pid", "mixer"}))
    return *axis + " demand";
  if (has_start(words, {"gyro", "omega"}) || has_word(words, {"rate"})) {
    if (const auto rate = rate_axis(words)) return *rate + " output";
  }
  if (has_start(words, {"acc"}) && has_word(words, {"z", "2"})) return "heave output";
  if (has_word(words, {"climb"})) return "heave output";
  return std::nullopt;
}

}  // namespace hoverwright::ident
