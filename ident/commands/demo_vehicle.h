// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <string>

namespace hoverwright::ident {

/// datasets/tern/vehicle.json, embedded at build time.
std::string demo_vehicle_text();

}  // namespace hoverwright::ident
