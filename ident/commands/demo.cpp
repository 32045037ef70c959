// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/demo.h"

#include <fmt/format.h>

#include "ident/commands/demo_vehicle.h"
#include "ident/commands/gains.h"
#include "ident/commands/identify.h"
#include "ident/commands/rehearse.h"
#include "ident/commands/report.h"
#include "ident/commands/schedule.h"
#include "ident/commands/study.h"
#include "ident/failure.h"
#include "ident/files.h"

namespace hoverwright::ident {

void run_demo(const DemoOptions& options, std::ostream& out) {
  const std::filesystem::path vehicle = vehicle_file(options.folder);
  if (std::filesystem::exists(vehicle) && read_file(vehicle) != demo_vehicle_text()) {
    throw Failure(FailureKind::bad_input, "the folder already holds another study", options.folder.string(),
                  "Name a new or empty folder.");
  }
  write_file(vehicle, demo_vehicle_text());
  out << "Tern, an invented 3.1 kg quadrotor that inspects harbour walls in gusty wind (simulated flight).\n";
  out << "\n== schedule ==\n";
  ScheduleCommandOptions schedule;
  schedule.study = options.folder;
  run_schedule(schedule, out);
  out << "\n== rehearse ==\n";
  RehearseCommandOptions rehearsal;
  rehearsal.study = options.folder;
  rehearsal.seed = options.seed;
  run_rehearse(rehearsal, out);
  out << "\n== identify ==\n";
  IdentifyOptions identify;
  identify.study = options.folder;
  identify.log = options.folder / "logs" / rehearsal.log_name;
  run_identify(identify, out);
  out << "\n== gains ==\n";
  GainsOptions gains;
  gains.study = options.folder;
  run_gains(gains, out);
  out << "\n== report ==\n";
  ReportCommandOptions report;
  report.study = options.folder;
  run_report(report, out);
}

}  // namespace hoverwright::ident
