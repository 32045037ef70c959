// SPDX-License-Identifier: GPL-3.0-or-later
#pragma once

#include <string_view>

// Files of reports/web and of uPlot, as text; the build makes the source from them (reports/web/embed.cmake).

namespace hoverwright::reports {

std::string_view page_template();  ///< report.html with its {{places}}
std::string_view page_style();
std::string_view page_script();
std::string_view uplot_script();
std::string_view uplot_style();
std::string_view uplot_licence();

}  // namespace hoverwright::reports
