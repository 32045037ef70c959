// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "reports/html_text.h"
#include "reports/report_sections.h"
#include "reports/report_sentences.h"

namespace hoverwright::reports {
namespace {

constexpr double kLargestFactor = 1.3;  // per step; common practice

std::optional<double> log_ratio(double present, double recommended) {
  if (!(present > 0.0 && recommended > 0.0)) return std::nullopt;
  return std::log(recommended / present);
}

std::string change_cell(double present, double recommended, const std::optional<double>& factor) {
  if (present == 0.0 && recommended == 0.0) return "<td class=\"none\">0</td>";
  const std::string change = shown_setting(present) + " \u2192 " + shown_setting(recommended);
  const std::string how =
      factor ? fmt::format("\u00d7 {} each", shown(*factor, 3))
             : std::string(present == 0.0 ? "in from 0 in equal parts" : "out in equal parts");
  return fmt::format("<td class=\"n\">{}<br><small>{}</small></td>", change, how);
}

std::string step_row(const ident::LoopRecommendation& loop) {
  const ident::LoopGains& recommended = *loop.recommended;
  const GainSteps steps = gain_steps(loop.present, recommended);
  return fmt::format("<tr><th>{}</th><td class=\"n\">{}</td>{}{}{}</tr>\n", loop_words(loop.loop),
                     steps.steps, change_cell(loop.present.kp, recommended.kp, steps.kp_factor),
                     change_cell(loop.present.ki, recommended.ki, steps.ki_factor),
                     change_cell(loop.present.kd, recommended.kd, steps.kd_factor));
}

}  // namespace

GainSteps gain_steps(const ident::LoopGains& present, const ident::LoopGains& recommended) {
  const std::optional<double> kp = log_ratio(present.kp, recommended.kp);
  const std::optional<double> ki = log_ratio(present.ki, recommended.ki);
  const std::optional<double> kd = log_ratio(present.kd, recommended.kd);
  const double largest =
      std::max({std::abs(kp.value_or(0.0)), std::abs(ki.value_or(0.0)), std::abs(kd.value_or(0.0))});
  GainSteps result;
  result.steps = std::max(1, static_cast<int>(std::ceil(largest / std::log(kLargestFactor))));
  const auto factor = [&](const std::optional<double>& ratio) {
    return ratio ? std::optional(std::exp(*ratio / result.steps)) : std::nullopt;
  };
  result.kp_factor = factor(kp);
  result.ki_factor = factor(ki);
  result.kd_factor = factor(kd);
  return result;
}

std::string bring_up_section(const std::optional<GainsResult>& gains) {
  std::string rows;
  if (gains) {
    for (const auto& [axis, recommendation] : gains->axes) {
      for (const ident::LoopRecommendation& loop : recommendation.loops) {
        if (loop.recommended) rows += step_row(loop);
      }
    }
  }
  if (rows.empty()) return {};
  return "<section id=\"bring-up\"><h2>Bringing the gains up</h2><ol>"
         "<li>One axis at a time, inner loop first: rate loop, then angle or heading. Leave the loops "
         "without new gains as they are.</li>"
         "<li>Change all gains of the loop together, by the factors below: no gain moves by more than 30 % "
         "in one step (common practice).</li>"
         "<li>At each step hover, tap the sticks, listen and look for ringing; land and go back one step if "
         "there is any.</li>"
         "<li>Fly the last step in the wind the vehicle works in, with the safety pilot ready.</li>"
         "<li>Excite again with the new gains and compare the measured loop with the margins above before "
         "relying on them.</li>"
         "</ol>\n<table "
         "class=\"steps\"><thead><tr><th>loop</th><th>steps</th><th>kp</th><th>ki</th><th>kd</th></tr></"
         "thead><tbody>\n" +
         rows + "</tbody></table></section>\n";
}

}  // namespace hoverwright::reports
