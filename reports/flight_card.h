// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <string>

#include "excitation/schedule/schedule.h"
#include "ident/vehicle/vehicle.h"

namespace hoverwright::reports {

/// Printable page for the pilot: one self-contained HTML file, A4 portrait, black on white. It holds the
/// abort limits, the battery budget drawn along the time line, the preparation list, the records in order
/// (start, length, peak, what to watch for, abort limits), the cautions of DESIGN's safety section and of the
/// schedule, and lines to sign. A schedule of four records on each of four axes fits one page; longer ones
/// continue on a second. Text from files is escaped.
std::string flight_card_html(const excitation::Schedule& schedule, const ident::Vehicle& vehicle);

}  // namespace hoverwright::reports
