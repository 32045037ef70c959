// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/new_vehicle.h"

#include <fmt/format.h>

#include "ident/failure.h"
#include "ident/files.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::ident {

void run_new_vehicle(const NewVehicleOptions& options, std::ostream& out) {
  const std::filesystem::path file = options.folder / "vehicle.json";
  if (std::filesystem::exists(std::filesystem::symlink_status(file))) {
    throw Failure(FailureKind::bad_input, "there already is a vehicle file, which is left as it is",
                  file.string(), "Choose another folder, or move that file away.");
  }
  write_file(file, vehicle_template(options.name));
  out << fmt::format(
      "Wrote {}, a vehicle file to start from.\n"
      "Go through it and put in your own values; the comments say what each is. Then plan the flight:\n"
      "  hoverwright schedule {}\n",
      file.string(), options.folder.string());
}

}  // namespace hoverwright::ident
