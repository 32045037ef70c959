// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/commands/report.h"

#include <fmt/format.h>

#include "ident/commands/study.h"
#include "ident/files.h"
#include "reports/report_page.h"

namespace hoverwright::ident {
namespace {

namespace fs = std::filesystem;
using reports::GainsResult;
using reports::IdentifyResult;
using reports::Provenance;

/// The inputs of a result file that are not results themselves, so that the page names the log it came from.
void add_inputs_of(const fs::path& result, Provenance& provenance) {
  for (const auto& [name, hash] : reports::read_provenance(result).inputs)
    provenance.inputs.emplace(name, hash);
}

bool same_models(const fs::path& gains, const fs::path& models) {
  const Provenance provenance = reports::read_provenance(gains);
  const auto used = provenance.inputs.find(models.filename().string());
  return used != provenance.inputs.end() && fs::exists(models) && used->second == sha256_of_file(models);
}

}  // namespace

void run_report(const ReportCommandOptions& options, std::ostream& out) {
  const fs::path responses = responses_file(options.study);
  require_step(responses, "identify");
  const fs::path models = models_file(options.study);
  const fs::path gains_path = gains_file(options.study);
  IdentifyResult identified = reports::read_identify_result(responses, models);
  std::vector<fs::path> inputs{responses};
  if (fs::exists(models)) inputs.push_back(models);
  std::optional<GainsResult> gains;
  if (fs::exists(gains_path)) {
    if (same_models(gains_path, models)) {
      gains = reports::read_gains_result(gains_path);
      inputs.push_back(gains_path);
    } else {
      identified.warnings.insert(
          identified.warnings.begin(),
          "the gains in gains.json were computed from other models than those in this study and "
          "are left out; run `hoverwright gains` again.");
    }
  }
  Provenance provenance = make_provenance(options.study, "report", inputs);
  for (const fs::path& input : inputs) add_inputs_of(input, provenance);
  const fs::path page = report_file(options.study);
  write_file(page, reports::report_html(identified, gains, provenance));
  out << fmt::format("written: {}\n", page.string());
}

}  // namespace hoverwright::ident
