// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <optional>
#include <string>
#include <string_view>

namespace hoverwright::ident {

/// What a column could be in a vehicle file, from the words in its name alone: "roll output", "yaw demand",
/// "heave excitation", "time". Nothing when the name says nothing or more than one thing. A hint for the
/// reader; no result is based on it.
std::optional<std::string> guess_role(std::string_view column);

}  // namespace hoverwright::ident
