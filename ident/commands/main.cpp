// SPDX-License-Identifier: GPL-3.0-or-later
// Command line of the program: parses, calls one command, turns failures into exit codes. No mathematics
// here.
#include <fmt/format.h>

#include <CLI/CLI.hpp>
#include <exception>
#include <iostream>
#include <map>
#include <ostream>
#include <string>
#include <vector>

#include "ident/commands/demo.h"
#include "ident/commands/gains.h"
#include "ident/commands/identify.h"
#include "ident/commands/inspect.h"
#include "ident/commands/new_vehicle.h"
#include "ident/commands/rehearse.h"
#include "ident/commands/report.h"
#include "ident/commands/schedule.h"
#include "ident/commands/study.h"
#include "ident/failure.h"

namespace {

using namespace hoverwright::ident;

/// Swallows what a command prints under --quiet.
class NullBuffer : public std::streambuf {
  int overflow(int character) override { return character; }
};

CLI::App* add_command(CLI::App& app, const std::string& name, const std::string& what,
                      const std::string& example) {
  CLI::App* command = app.add_subcommand(name, what);
  command->footer("Example:\n  " + example);
  return command;
}

/// "roll=0.05" -> amplitude of the axis.
std::map<Axis, double> parse_amplitudes(const std::vector<std::string>& words) {
  std::map<Axis, double> amplitudes;
  for (const std::string& word : words) {
    const std::size_t equals = word.find('=');
    const auto axis = axis_from_name(word.substr(0, equals));
    double value = 0.0;
    std::size_t used = 0;
    try {
      if (equals != std::string::npos) value = std::stod(word.substr(equals + 1), &used);
    } catch (const std::exception&) {
      used = 0;
    }
    if (!axis || used == 0 || used != word.size() - equals - 1) {
      throw Failure(
          FailureKind::bad_input, fmt::format("'{}' is not AXIS=PEAK", word), "--amplitude",
          "Axes are roll, pitch, yaw, heave; for example --amplitude roll=0.04 --amplitude yaw=0.06.");
    }
    amplitudes[*axis] = value;
  }
  return amplitudes;
}

struct Program {
  CLI::App app{
      "Hoverwright: from a short, safe test flight to controller gains that can be defended.\n"
      "Excitation can upset a vehicle: fly with a safety pilot, clear of people, within local rules."};
  bool quiet = false;
  NewVehicleOptions new_vehicle;
  InspectOptions inspect;
  ScheduleCommandOptions schedule;
  std::vector<std::string> amplitudes;
  RehearseCommandOptions rehearse;
  bool fly_recommended = false;
  IdentifyOptions identify;
  GainsOptions gains;
  ReportCommandOptions report;
  DemoOptions demo;

  CLI::App* new_command = nullptr;
  CLI::App* inspect_command = nullptr;
  CLI::App* schedule_command = nullptr;
  CLI::App* rehearse_command = nullptr;
  CLI::App* identify_command = nullptr;
  CLI::App* gains_command = nullptr;
  CLI::App* report_command = nullptr;
  CLI::App* demo_command = nullptr;

  Program();
  void add_planning();
  void add_results();
  void run(std::ostream& out);
};

Program::Program() {
  app.require_subcommand(1);
  app.set_version_flag("--version", std::string("hoverwright ") + HOVERWRIGHT_VERSION);
  app.add_flag("--quiet", quiet, "Print nothing but errors");
  app.fallthrough();
  add_planning();
  add_results();
}

void Program::add_planning() {
  new_command = add_command(app, "new", "Write a commented vehicle file to start from",
                            "hoverwright new my_study --name \"Quad 7\"");
  new_command->add_option("DIR", new_vehicle.folder, "Study folder, made if missing")->required();
  new_command->add_option("--name", new_vehicle.name, "Name of the vehicle")->capture_default_str();

  schedule_command =
      add_command(app, "schedule", "Plan the excitation flight: schedule, playback file, flight card",
                  "hoverwright schedule my_study --low 0.4 --record 40 --amplitude yaw=0.08");
  auto& plan = schedule.plan;
  schedule_command->add_option("STUDY", schedule.study, "Study folder with vehicle.json")->required();
  schedule_command->add_option("--low", plan.low_hz, "Lowest frequency, Hz")->capture_default_str();
  schedule_command->add_option("--high", plan.high_hz, "Highest frequency, Hz")->capture_default_str();
  schedule_command->add_option("--record", plan.record_s, "Length of one chirp, s")->capture_default_str();
  schedule_command->add_option("--repeats", plan.repeats, "Chirps per axis")->capture_default_str();
  schedule_command->add_option("--trim", plan.trim_s, "Quiet time before and after each record, s")
      ->capture_default_str();
  schedule_command->add_option("--fade", plan.fade_s, "Fade in and out of a chirp, s")->capture_default_str();
  schedule_command->add_option("--doublet", plan.doublet_s, "Length of one validation doublet, s")
      ->capture_default_str();
  schedule_command
      ->add_option("--demand-share", plan.demand_share,
                   "Yaw and heave peak as a share of limits.demand where --amplitude gives none")
      ->capture_default_str();
  schedule_command
      ->add_option("--lean-share", plan.lean_share,
                   "Roll and pitch peak as a share of limits.demand where --amplitude gives none")
      ->capture_default_str();
  schedule_command->add_option("--amplitude", amplitudes, "AXIS=PEAK, normalised demand; may be repeated");
  schedule_command->add_option("--reserve", plan.reserve_s, "Time kept for take-off, return and landing, s")
      ->capture_default_str();

  rehearse_command = add_command(app, "rehearse", "Fly the schedule in simulation: excursions and a log",
                                 "hoverwright rehearse my_study --seed 3");
  rehearse_command->add_option("STUDY", rehearse.study, "Study folder with vehicle.json and schedule.json")
      ->required();
  rehearse_command->add_option("--seed", rehearse.seed, "Seed of gusts and sensor noise")
      ->capture_default_str();
  rehearse_command->add_option("--log", rehearse.log_name, "Name of the log in STUDY/logs")
      ->capture_default_str();
  rehearse_command->add_flag("--calm", rehearse.calm, "Steady wind without turbulence");
  rehearse_command->add_flag("--recommended", fly_recommended,
                             "Fly the gains proposed in gains.json instead of the present ones");
}

void Program::add_results() {
  inspect_command = add_command(app, "inspect", "What is in a log: channels, rates, gaps, clipping, records",
                                "hoverwright inspect flight.csv --vehicle my_study/vehicle.json");
  inspect_command->add_option("LOG", inspect.log, "Log file")->required();
  inspect_command->add_option("--vehicle", inspect.vehicle, "Vehicle file that maps the channels");
  inspect_command->add_flag("--json", inspect.json, "Print a machine-readable summary");

  identify_command = add_command(app, "identify", "Frequency responses and models from a log",
                                 "hoverwright identify my_study --log flight.csv --from 12 --to 480");
  identify_command->add_option("STUDY", identify.study, "Study folder with vehicle.json")->required();
  identify_command->add_option("--log", identify.log, "Log file; default: the only file in STUDY/logs");
  identify_command->add_option("--from", identify.range.from_s, "Start, s from the first time stamp")
      ->capture_default_str();
  identify_command->add_option("--to", identify.range.to_s,
                               "End, s from the first time stamp; default: the end of the log");
  identify_command
      ->add_option("--low", identify.low_hz, "Lowest frequency used, Hz; 0: where the excitation begins")
      ->capture_default_str();
  identify_command
      ->add_option("--high", identify.high_hz, "Highest frequency used, Hz; 0: where the excitation ends")
      ->capture_default_str();
  identify_command
      ->add_option("--segment", identify.segment_s, "Window length, s; 0: chosen from the records")
      ->capture_default_str();
  identify_command->add_flag("--responses-only", identify.responses_only, "Do not ask for models");
  identify_command->add_flag("--json", identify.json, "Print the result file instead of tables");

  gains_command = add_command(app, "gains", "Margins of the present gains and proposed gains",
                              "hoverwright gains my_study --phase-margin 50");
  auto& require = gains.requirements;
  gains_command->add_option("STUDY", gains.study, "Study folder with models.json")->required();
  gains_command->add_option("--gain-margin", require.gain_margin_db, "Least gain margin, dB")
      ->capture_default_str();
  gains_command->add_option("--phase-margin", require.phase_margin_deg, "Least phase margin, deg")
      ->capture_default_str();
  gains_command->add_option("--sensitivity", require.sensitivity_peak, "Largest sensitivity peak")
      ->capture_default_str();
  gains_command
      ->add_option("--share", require.share_of_draws, "Share of the model's draws that must meet them")
      ->capture_default_str();
  gains_command->add_option("--draws", require.draws, "Joint draws from the model's uncertainty")
      ->capture_default_str();
  gains_command->add_option("--seed", require.seed, "Seed of the draws")->capture_default_str();
  gains_command
      ->add_option("--demand-noise", require.demand_noise_rms,
                   "Largest demand caused by sensor noise, rms, normalised")
      ->capture_default_str();
  gains_command->add_flag("--json", gains.json, "Print gains.json instead of tables");

  report_command = add_command(app, "report", "Write report.html from what the study holds",
                               "hoverwright report my_study");
  report_command->add_option("STUDY", report.study, "Study folder")->required();

  demo_command =
      add_command(app, "demo", "The whole chain on the demo vehicle", "hoverwright demo demo_study");
  demo_command->add_option("DIR", demo.folder, "Folder for the demo study")->required();
  demo_command->add_option("--seed", demo.seed, "Seed of gusts and sensor noise")->capture_default_str();
}

void Program::run(std::ostream& out) {
  if (*new_command) run_new_vehicle(new_vehicle, out);
  if (*inspect_command) run_inspect(inspect, out);
  if (*schedule_command) {
    schedule.plan.amplitude = parse_amplitudes(amplitudes);
    run_schedule(schedule, out);
  }
  if (*rehearse_command) {
    if (fly_recommended) {
      require_step(gains_file(rehearse.study), "gains");
      rehearse.gains =
          recommended_gain_set(read_vehicle(vehicle_file(rehearse.study)),
                               hoverwright::reports::read_gains_result(gains_file(rehearse.study)));
    }
    run_rehearse(rehearse, out);
  }
  if (*identify_command) run_identify(identify, out);
  if (*gains_command) run_gains(gains, out);
  if (*report_command) run_report(report, out);
  if (*demo_command) run_demo(demo, out);
}

}  // namespace

int main(int argc, char** argv) {
  Program program;
  try {
    program.app.parse(argc, argv);
  } catch (const CLI::Success& success) {
    return program.app.exit(success);  // --help, --version
  } catch (const CLI::ParseError& error) {
    std::cerr << "hoverwright: " << error.what()
              << "\n  See hoverwright --help, or hoverwright COMMAND --help.\n";
    return 2;
  }
  NullBuffer null_buffer;
  std::ostream nothing(&null_buffer);
  try {
    program.run(program.quiet ? nothing : std::cout);
    std::cout.flush();
    return 0;
  } catch (const Failure& failure) {
    std::cout.flush();
    std::cerr << "hoverwright: " << failure.what() << "\n";
    return failure.exit_code();
  } catch (const std::exception& error) {
    std::cout.flush();
    std::cerr << "hoverwright: " << error.what() << "\n";
    return 1;
  }
}
