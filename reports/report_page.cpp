// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/report_page.h"

#include "reports/html_text.h"
#include "reports/page_assets.h"
#include "reports/report_plots.h"
#include "reports/report_sections.h"

namespace hoverwright::reports {

std::string report_html(const IdentifyResult& identified, const std::optional<GainsResult>& gains,
                        const Provenance& provenance) {
  std::string body = title_block(identified.vehicle_name, provenance);
  body += warnings_section(identified, gains);
  body += summary_section(identified, gains);
  body += cautions_section();
  for (const auto& [axis, result] : identified.axes) body += axis_section(axis, result);
  body += gains_section(gains);
  body += bring_up_section(gains);
  body += "<footer><details><summary>Plots drawn with uPlot; its licence</summary><pre>";
  body += html_escaped(uplot_licence());
  body += "</pre></details></footer>\n";

  const std::string title = html_escaped(identified.vehicle_name) + ": hover response and gains review";
  const std::string data = script_escaped(plot_data(identified));
  return filled(page_template(), {{"title", title},
                                  {"uplot_style", uplot_style()},
                                  {"style", page_style()},
                                  {"body", body},
                                  {"data", data},
                                  {"uplot_script", uplot_script()},
                                  {"script", page_script()}});
}

}  // namespace hoverwright::reports
