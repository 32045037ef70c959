// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <cstdint>
#include <filesystem>
#include <ostream>

namespace hoverwright::ident {

struct DemoOptions {
  std::filesystem::path folder;
  std::uint64_t seed = 1;
};

/// The whole chain on the demo vehicle Tern: vehicle file, schedule, rehearsed flight, responses and models,
/// gains, report.
/// @throws Failure (bad_input) when the folder already holds another study.
void run_demo(const DemoOptions& options, std::ostream& out);

}  // namespace hoverwright::ident
