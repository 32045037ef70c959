// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <filesystem>
#include <ostream>
#include <string>

namespace hoverwright::ident {

struct NewVehicleOptions {
  std::filesystem::path folder;  ///< made if missing
  std::string name = "My vehicle";
};

/// Writes a commented vehicle.json to start from.
/// @throws Failure (bad_input) when the folder already has one; it is left as it is.
void run_new_vehicle(const NewVehicleOptions& options, std::ostream& out);

}  // namespace hoverwright::ident
