// SPDX-License-Identifier: GPL-3.0-or-later
#include "reports/flight_card.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <iterator>
#include <string_view>

namespace hoverwright::reports {
namespace {

using excitation::Chirp;
using excitation::Doublet;
using excitation::Schedule;
using excitation::ScheduledRecord;
using ident::Axis;
using ident::Limits;
using ident::Vehicle;

// Lines and figures are drawn with borders and SVG only: browsers leave CSS backgrounds out of prints.
constexpr std::string_view kStyle = R"(
@page { size: A4 portrait; margin: 9mm 10mm; }
* { box-sizing: border-box; }
html { background: #fff; color: #000; }
body { width: 190mm; margin: 0 auto;
  font: 8.4pt/1.22 "Helvetica Neue", Arial, "Liberation Sans", sans-serif; }
@media screen { body { margin: 8mm auto; } }
h1 { font-size: 21pt; line-height: 1; margin: 0; overflow-wrap: anywhere; }
h2 { font-size: 7.4pt; letter-spacing: 0.09em; text-transform: uppercase; margin: 0 0 0.8mm; }
header { display: flex; justify-content: space-between; align-items: flex-end;
  border-bottom: 1.1mm solid #000; padding-bottom: 1.5mm; gap: 6mm; }
header p { margin: 0; text-align: right; white-space: nowrap; }
section { margin-top: 2.4mm; }
.abort { display: flex; border: 0.6mm solid #000; padding: 1.5mm 2.5mm; gap: 4mm; align-items: center; }
.abort dl { display: flex; margin: 0; gap: 5mm; flex: none; }
.abort dt { font-size: 7.4pt; }
.abort dd { margin: 0; font-size: 14.5pt; font-weight: 700; line-height: 1.05; white-space: nowrap; }
.abort p { margin: 0; }
svg { display: block; width: 100%; }
.budget { margin: 0.8mm 0 0; }
.pair { display: grid; grid-template-columns: 1fr 1fr; gap: 6mm; }
ul { margin: 0; padding: 0; list-style: none; }
li { position: relative; padding-left: 4.2mm; margin-bottom: 0.5mm; overflow-wrap: anywhere; }
li::before { content: ""; position: absolute; left: 0; top: 0.5mm; width: 2.5mm; height: 2.5mm;
  border: 0.25mm solid #000; }
.plain li { padding-left: 2.8mm; }
.plain li::before { content: "–"; top: 0; border: 0; }
table { width: 100%; border-collapse: collapse; font-variant-numeric: tabular-nums; }
thead { display: table-header-group; }
th { font-size: 7.2pt; text-align: left; vertical-align: bottom; padding: 0 1.2mm 0.5mm; white-space: nowrap;
  border-bottom: 0.4mm solid #000; }
td { padding: 0.42mm 1.2mm; border-bottom: 0.15mm solid #888; vertical-align: top; }
tbody { break-inside: avoid; }
tbody tr:last-child td, tbody td.whole { border-bottom: 0.4mm solid #000; }
.n { text-align: right; }
.n, .w { white-space: nowrap; }
.axis { font-weight: 700; font-size: 9.6pt; }
.box { display: inline-block; width: 2.6mm; height: 2.6mm; border: 0.25mm solid #000; }
.sign { display: grid; grid-template-columns: repeat(3, 1fr); gap: 3.6mm 6mm; margin-top: 2.4mm;
  break-inside: avoid; }
.sign div { border-top: 0.25mm solid #000; padding-top: 0.4mm; margin-top: 4.4mm; font-size: 7.2pt; }
footer { margin-top: 1.6mm; font-size: 6.8pt; color: #333; }
)";

std::string escape(std::string_view text) {
  std::string safe;
  for (const char c : text) {
    switch (c) {
      case '&':
        safe += "&amp;";
        break;
      case '<':
        safe += "&lt;";
        break;
      case '>':
        safe += "&gt;";
        break;
      case '"':
        safe += "&quot;";
        break;
      case '\'':
        safe += "&#39;";
        break;
      default:
        safe += c;
    }
  }
  return safe;
}

/// "3:07.8" minutes and seconds.
std::string clock(double t_s) {
  const auto tenths = std::lround(10.0 * t_s);
  return fmt::format("{}:{:02}.{}", tenths / 600, tenths / 10 % 60, tenths % 10);
}

/// "7 min 42 s", rounded up: a budget must not look smaller than it is.
std::string minutes(double t_s) {
  const auto seconds = static_cast<long>(std::ceil(t_s - 1e-6));
  return seconds < 60 ? fmt::format("{}&nbsp;s", seconds)
                      : fmt::format("{}&nbsp;min&nbsp;{:02}&nbsp;s", seconds / 60, seconds % 60);
}

/// What a person on the ground sees when all is well. Positive demands: right wing down, nose up, clockwise
/// from above, up.
std::string_view watch_for(const ScheduledRecord& record) {
  const bool chirp = std::holds_alternative<Chirp>(record.signal);
  switch (record.axis) {
    case Axis::roll:
      return chirp ? "Slow lean right and left, ever faster and smaller. Height holds."
                   : "One kick right, one left, then level.";
    case Axis::pitch:
      return chirp ? "Slow nod up and down, ever faster and smaller. Height holds."
                   : "One kick nose up, one down, then level.";
    case Axis::yaw:
      return chirp ? "Heading swings, then shivers. No lean, height holds."
                   : "One twist clockwise, one back, heading returns.";
    case Axis::heave:
      break;
  }
  return chirp ? "Slow bobbing, then only a changing tone. No lean, no turn."
               : "One hop up, one down, height returns.";
}

/// The limits this axis reaches first; all of them hold all the time.
std::string abort_beyond(Axis axis, const Limits& limits) {
  const std::string tilt = fmt::format("tilt {:.4g}°", limits.tilt_deg);
  const std::string rate = fmt::format("rate {:.4g}°/s", limits.rate_deg_s);
  const std::string drift = fmt::format("drift {:.4g}&nbsp;m", limits.drift_m);
  const std::string climb = fmt::format("climb ±{:.4g}&nbsp;m", limits.climb_m);
  switch (axis) {
    case Axis::roll:
    case Axis::pitch:
      return tilt + "<br>" + rate + "<br>" + drift + "<br>" + climb;
    case Axis::yaw:
      return rate + "<br>" + drift + "<br>" + tilt + "<br>" + climb;
    case Axis::heave:
      break;
  }
  return climb + "<br>" + tilt + "<br>" + drift + "<br>" + rate;
}

std::string shape(const ScheduledRecord& record) {
  if (const auto* chirp = std::get_if<Chirp>(&record.signal)) {
    return fmt::format("{:.3g}–{:.3g} Hz", chirp->low_hz, chirp->high_hz);
  }
  return fmt::format("+{0:.3g} s, −{0:.3g} s", 0.5 * record.duration_s());
}

std::string header(const Schedule& schedule) {
  return fmt::format(
      "<header><div><h2>Flight card · excitation flight</h2><h1>{}</h1></div><p>{} records · control loop "
      "{:.4g} Hz<br>"
      "schedule {}</p></header>\n",
      escape(schedule.vehicle_name), schedule.records.size(), schedule.sample_rate_hz,
      minutes(schedule.duration_s));
}

std::string abort_box(const Limits& limits) {
  return fmt::format(
      "<section class=\"abort\"><dl><div><dt>tilt</dt><dd>{:.4g}°</dd></div><div><dt>any "
      "rate</dt><dd>{:.4g}°/s</dd></div>"
      "<div><dt>drift</dt><dd>{:.4g} m</dd></div><div><dt>climb or sink</dt><dd>{:.4g} m</dd></div></dl>"
      "<p><strong>Abort</strong> beyond any of these, in every record, and whenever you do not like what you "
      "see: excitation "
      "off, take over, level, land. Do not repeat an aborted record as it stands.</p></section>\n",
      limits.tilt_deg, limits.rate_deg_s, limits.drift_m, limits.climb_m);
}

/// The flight along the battery: one lane per axis, then reserve and what is left.
std::string time_line(const Schedule& schedule) {
  constexpr double kLeft = 40.0, kWidth = 716.0, kLane = 13.0, kTop = 3.0;
  std::vector<Axis> lanes;
  for (const ScheduledRecord& record : schedule.records) {
    if (std::find(lanes.begin(), lanes.end(), record.axis) == lanes.end()) lanes.push_back(record.axis);
  }
  const double needed_s = schedule.duration_s + schedule.reserve_s;
  const double span_s = std::max(schedule.endurance_s, needed_s);
  const auto x = [&](double t_s) { return kLeft + kWidth * t_s / span_s; };
  const double height = kLane * static_cast<double>(lanes.size());
  const double bottom = kTop + height;
  std::string svg = fmt::format(
      "<svg viewBox=\"0 0 760 {:.0f}\" font-size=\"10\" role=\"img\" aria-label=\"Time line of the "
      "flight\"><defs><pattern "
      "id=\"reserve\" width=\"6\" height=\"6\" patternUnits=\"userSpaceOnUse\"><path d=\"M0 6L6 0\" "
      "stroke=\"#000\" "
      "stroke-width=\"0.7\"/></pattern></defs>\n",
      bottom + 16.0);
  auto out = std::back_inserter(svg);
  for (std::size_t k = 0; k < lanes.size(); ++k) {
    const double y = kTop + kLane * static_cast<double>(k);
    fmt::format_to(out, "<text x=\"0\" y=\"{:.1f}\">{}</text>", y + 10.0, ident::axis_name(lanes[k]));
    fmt::format_to(out, "<path d=\"M{0} {1:.1f}H{2:.1f}\" stroke=\"#aaa\" stroke-width=\"0.5\"/>\n", kLeft,
                   y + kLane, x(schedule.duration_s));
  }
  for (const ScheduledRecord& record : schedule.records) {
    const auto lane = std::find(lanes.begin(), lanes.end(), record.axis) - lanes.begin();
    // A doublet would be thinner than a hair: one unit at least.
    fmt::format_to(out, "<rect x=\"{:.1f}\" y=\"{:.1f}\" width=\"{:.1f}\" height=\"{}\" fill=\"{}\"/>\n",
                   x(record.start_s), kTop + kLane * static_cast<double>(lane) + 2.5,
                   std::max(1.0, kWidth * record.duration_s() / span_s), kLane - 4.0,
                   record.validation ? "#000" : "#777");
  }
  fmt::format_to(
      out,
      "<rect x=\"{:.1f}\" y=\"{}\" width=\"{:.1f}\" height=\"{}\" fill=\"url(#reserve)\" stroke=\"#000\" "
      "stroke-width=\"0.7\"/>\n",
      x(schedule.duration_s), kTop, kWidth * schedule.reserve_s / span_s, height);
  fmt::format_to(out,
                 "<rect x=\"{}\" y=\"{}\" width=\"{:.1f}\" height=\"{}\" fill=\"none\" stroke=\"#000\"/>\n",
                 kLeft, kTop, kWidth * schedule.endurance_s / span_s, height);
  // Whole minutes, thinned so that about a dozen numbers stand there.
  const auto step = static_cast<long>(std::ceil(span_s / 60.0 / 14.0));
  for (long minute = 0; 60.0 * static_cast<double>(minute) <= span_s; minute += step) {
    const double at = x(60.0 * static_cast<double>(minute));
    fmt::format_to(out,
                   "<path d=\"M{0:.1f} {1}v3\" stroke=\"#000\"/><text x=\"{0:.1f}\" y=\"{2}\" "
                   "text-anchor=\"{3}\">{4}</text>\n",
                   at, bottom, bottom + 13.0, 756.0 - at < 15.0 ? "end" : "middle",
                   minute == 0 ? "0 min" : std::to_string(minute));
  }
  return svg + "</svg>";
}

std::string budget(const Schedule& schedule) {
  const double needed_s = schedule.duration_s + schedule.reserve_s;
  const double spare_s = schedule.endurance_s - needed_s;
  return fmt::format(
      "<section><h2>Time and battery</h2>{}<p class=\"budget\">Schedule <strong>{}</strong> (grey: chirps, "
      "black: doublets) + "
      "reserve for take-off, return, landing <strong>{}</strong> (hatched) = {} of the battery's {}, {}. "
      "A battery warning overrules the clock.</p></section>\n",
      time_line(schedule), minutes(schedule.duration_s), minutes(schedule.reserve_s), minutes(needed_s),
      minutes(schedule.endurance_s),
      spare_s >= 0.0 ? minutes(std::floor(spare_s + 1e-6)) + " to spare"
                     : fmt::format("<strong>{} too much: do not fly this</strong>", minutes(-spare_s)));
}

/// Columns that must be in the log, of the axes that fly.
std::string logged_channels(const Schedule& schedule, const Vehicle& vehicle) {
  std::string names;
  for (const Axis axis : ident::kAxes) {
    const auto& setup = vehicle.axes[ident::axis_index(axis)];
    const bool flies = std::any_of(schedule.records.begin(), schedule.records.end(),
                                   [axis](const ScheduledRecord& record) { return record.axis == axis; });
    if (!setup || !flies) continue;
    if (setup->channels.excitation) names += escape(setup->channels.excitation->name) + ", ";
    names += escape(setup->channels.demand.name) + ", " + escape(setup->channels.output.name) + ", ";
  }
  return names + escape(vehicle.time.name);
}

std::string weather(const Vehicle& vehicle) {
  std::string rehearsed;
  if (vehicle.airframe) {
    const ident::Weather& air = vehicle.airframe->weather;
    rehearsed = fmt::format(
        " The rehearsal assumes a wind of {:.3g} m/s with {}: do not fly in more.", air.wind_m_s,
        air.turbulence_wind_m_s > 0.0 ? fmt::format("the turbulence of {:.3g} m/s", air.turbulence_wind_m_s)
                                      : std::string("no turbulence"));
  }
  return "Weather: take the calmest hour. Gusts add to every lean and widen every interval." + rehearsed;
}

std::string preparation(const Schedule& schedule, const Vehicle& vehicle) {
  const Limits& limits = vehicle.limits;
  return fmt::format(
      "<section class=\"pair\"><div><h2>On the bench</h2><ul><li>Schedule rehearsed, predicted excursions "
      "inside the limits</li>"
      "<li>Battery full and warm; propellers, arms and payload tight</li>"
      "<li>Playback file loaded; it adds to the demand after the controller and before the mixer; tried "
      "without "
      "propellers</li><li>Abort switch tried: it stops the excitation at once and leaves the controller "
      "flying</li>"
      "<li>Logging on at {:.4g} Hz: {}</li></ul></div><div><h2>In the field</h2><ul>"
      "<li>Room: {:.4g} m to every side, {:.4g} m above and below the hover point, and as much again to "
      "recover; people well "
      "outside</li><li>{}</li><li>Crew briefed: who calls the records, who aborts</li>"
      "<li>Hover on the present gains first; start the schedule only from a steady hover with position "
      "hold</li>"
      "<li>Log checked for all channels before packing up</li></ul></div></section>\n",
      schedule.sample_rate_hz, logged_channels(schedule, vehicle), limits.drift_m, limits.climb_m,
      weather(vehicle));
}

/// Rows of one axis from `first` to before `last`; the axis, what to watch for and the abort limits span
/// their rows.
std::string axis_rows(const Schedule& schedule, const Vehicle& vehicle, std::size_t first, std::size_t last) {
  std::string rows = "<tbody>";
  auto out = std::back_inserter(rows);
  std::size_t watch_until = first;
  for (std::size_t k = first; k < last; ++k) {
    const ScheduledRecord& record = schedule.records[k];
    rows += "<tr>";
    if (k == first) {
      fmt::format_to(out, "<td class=\"axis whole\" rowspan=\"{}\">{}</td>", last - first,
                     ident::axis_name(record.axis));
    }
    fmt::format_to(
        out,
        "<td><span class=\"box\"></span></td><td class=\"n\">{}</td><td class=\"n\"><strong>{}</strong></td>"
        "<td class=\"w\">{}</td><td class=\"w\">{}</td><td class=\"n\">{:.3g} s</td><td class=\"n\">{:.3g} "
        "({:.0f} %)</td>",
        k + 1, clock(record.start_s), escape(record.name), shape(record), record.duration_s(),
        record.amplitude(), 100.0 * record.amplitude() / vehicle.limits.demand);
    if (k == watch_until) {
      while (watch_until < last && schedule.records[watch_until].signal.index() == record.signal.index())
        ++watch_until;
      fmt::format_to(out, "<td rowspan=\"{}\"{}>{}</td>", watch_until - k,
                     watch_until == last ? " class=\"whole\"" : "", watch_for(record));
    }
    if (k == first) {
      fmt::format_to(out, "<td class=\"whole w\" rowspan=\"{}\">{}</td>", last - first,
                     abort_beyond(record.axis, vehicle.limits));
    }
    rows += "</tr>\n";
  }
  return rows + "</tbody>\n";
}

std::string records_table(const Schedule& schedule, const Vehicle& vehicle) {
  std::string table =
      "<section><h2>Records, in this order</h2><table><thead><tr><th>axis</th><th></th><th "
      "class=\"n\">no.</th>"
      "<th class=\"n\">start</th><th>record</th><th>signal</th><th class=\"n\">lasts</th><th "
      "class=\"n\">peak demand</th>"
      "<th>watch for</th><th>abort beyond</th></tr></thead>\n";
  for (std::size_t first = 0, last = 0; first < schedule.records.size(); first = last) {
    while (last < schedule.records.size() && schedule.records[last].axis == schedule.records[first].axis)
      ++last;
    table += axis_rows(schedule, vehicle, first, last);
  }
  return table + fmt::format(
                     "</table><p class=\"budget\">Start in minutes and seconds from the start of the "
                     "playback. Peak demand is "
                     "normalised; in brackets its share of the demand limit ({:.3g}). Quiet hover for {:.3g} "
                     "s before and "
                     "after every record: use it to judge whether to go on.</p></section>\n",
                     vehicle.limits.demand, schedule.trim_s);
}

std::string cautions(const Schedule& schedule) {
  std::string list = "<section><h2>Cautions</h2><ul class=\"plain\">";
  for (const std::string& caution : schedule.cautions)
    list += "<li><strong>" + escape(caution) + "</strong></li>";
  return list +
         "<li>Excitation disturbs the vehicle on purpose and can upset it. A safety pilot, hands on the "
         "sticks, can abort at "
         "any moment.</li><li>Fly clear of people, within local rules and the maker's limits; the stricter "
         "one holds.</li>"
         "<li>Gains that come out of this flight are brought up in steps, each step flown and judged before "
         "the next.</li>"
         "<li>Nothing here replaces licensed practice or airworthiness approval.</li></ul></section>\n";
}

constexpr std::string_view kSignatures =
    "<section class=\"sign\"><div>pilot</div><div>safety pilot</div><div>engineer</div><div>date, place</div>"
    "<div>battery, take-off and landing time</div><div>wind and gusts, m/s</div></section>\n";

}  // namespace

std::string flight_card_html(const Schedule& schedule, const Vehicle& vehicle) {
  std::string page = "<!DOCTYPE html>\n<html lang=\"en\"><head><meta charset=\"utf-8\"><title>Flight card: ";
  page += escape(schedule.vehicle_name);
  page += "</title><style>";
  page += kStyle;
  page += "</style></head><body>\n";
  page += header(schedule);
  page += abort_box(vehicle.limits);
  page += budget(schedule);
  page += preparation(schedule, vehicle);
  page += records_table(schedule, vehicle);
  page += cautions(schedule);
  page += kSignatures;
  page += "<footer>Hoverwright " HOVERWRIGHT_VERSION
          " · belongs to schedule.json and playback/schedule.csv written with it"
          "</footer>\n</body></html>\n";
  return page;
}

}  // namespace hoverwright::reports
