// SPDX-License-Identifier: GPL-3.0-or-later
#include <fmt/format.h>

#include <algorithm>

#include "ident/models/structure.h"
#include "reports/result_json.h"
#include "reports/result_readers.h"

namespace hoverwright::reports {
namespace {

using ident::ModelFit;
using ident::ParameterEstimate;
using ident::ValidationResult;

OrderedJson parameter_json(const ParameterEstimate& parameter) {
  return {{"value", number_json(parameter.value)},
          {"standard_error", number_json(parameter.standard_error)},
          {"low", number_json(parameter.low)},
          {"high", number_json(parameter.high)},
          {"unit", parameter.unit},
          {"identifiable", parameter.identifiable}};
}

OrderedJson validation_json(const std::vector<ValidationResult>& records) {
  OrderedJson array = OrderedJson::array();
  for (const ValidationResult& record : records) {
    array.push_back({{"fit_percent", number_json(record.fit_percent)},
                     {"theil_inequality", number_json(record.theil_inequality)},
                     {"time_s", array_json(record.time_s)},
                     {"measured", array_json(record.measured)},
                     {"simulated", array_json(record.simulated)}});
  }
  return array;
}

OrderedJson model_json(const ModelFit& fit, const std::vector<ValidationResult>& validation) {
  OrderedJson json;
  json["structure"] = fit.structure;
  json["sample_rate_hz"] = number_json(fit.sample_rate_hz);
  OrderedJson parameters = OrderedJson::object();
  OrderedJson order = OrderedJson::array();
  for (const ParameterEstimate& parameter : fit.parameters) {
    parameters[parameter.name] = parameter_json(parameter);
    order.push_back(parameter.name);
  }
  json["parameters"] = parameters;
  json["covariance_order"] = order;
  json["covariance"] = matrix_json(fit.covariance);
  json["fitted_covariance"] = matrix_json(fit.fitted_covariance);
  json["band_hz"] = {number_json(fit.band_low_hz), number_json(fit.band_high_hz)};
  json["reduced_chi_square"] = number_json(fit.reduced_chi_square);
  json["residual_degrees_of_freedom"] = number_json(fit.residual_degrees_of_freedom);
  json["points"] = fit.points;
  json["iterations"] = fit.iterations;
  json["warnings"] = fit.warnings;
  json["validation"] = validation_json(validation);
  return json;
}

ParameterEstimate read_parameter(ResultObject json, const std::string& name) {
  ParameterEstimate parameter;
  parameter.name = name;
  parameter.value = json.finite("value");
  parameter.standard_error = json.number("standard_error");
  parameter.low = json.number("low");
  parameter.high = json.number("high");
  parameter.unit = json.text("unit");
  parameter.identifiable = json.boolean("identifiable");
  json.finish();
  return parameter;
}

std::vector<ValidationResult> read_validation(ResultObject& model) {
  std::vector<ValidationResult> records;
  for (ResultObject json : model.objects("validation")) {
    ValidationResult record;
    record.fit_percent = json.number("fit_percent");
    record.theil_inequality = json.number("theil_inequality");
    record.time_s = json.numbers("time_s");
    record.measured = json.numbers("measured", record.time_s.size());
    record.simulated = json.numbers("simulated", record.time_s.size());
    json.finish();
    records.push_back(std::move(record));
  }
  return records;
}

const ident::Structure& known_structure(const ResultObject& model, const std::string& name) {
  const std::vector<std::string> names = ident::Structure::names();
  if (std::find(names.begin(), names.end(), name) == names.end()) {
    model.fail("structure", fmt::format("\"{}\" is not a structure this version knows", name),
               fmt::format("Known are {}.", fmt::join(names, ", ")));
  }
  return ident::Structure::find(name);
}

void read_parameters(ResultObject& model, ModelFit& fit) {
  const ident::Structure& structure = known_structure(model, fit.structure);
  const std::vector<std::string> order = model.texts("covariance_order");
  std::vector<std::string> expected;
  for (const ident::ParameterSpec& spec : structure.parameters()) expected.push_back(spec.name);
  if (order != expected) {
    model.fail("covariance_order",
               fmt::format("expected {} for structure {}", fmt::join(expected, ", "), fit.structure));
  }
  ResultObject parameters = model.object("parameters");
  for (const std::string& name : order)
    fit.parameters.push_back(read_parameter(parameters.object(name), name));
  parameters.finish();
  const Eigen::Index size = static_cast<Eigen::Index>(order.size());
  fit.covariance = model.square_matrix("covariance", size);
  fit.fitted_covariance = model.square_matrix("fitted_covariance", size);
}

ModelFit read_model(ResultObject& model) {
  ModelFit fit;
  fit.status = ident::FitStatus::converged;
  fit.structure = model.text("structure");
  fit.sample_rate_hz = model.finite("sample_rate_hz");
  if (fit.sample_rate_hz <= 0.0) model.fail("sample_rate_hz", "a sample rate must be positive");
  read_parameters(model, fit);
  const Eigen::VectorXd band = model.numbers("band_hz", 2);
  fit.band_low_hz = band(0);
  fit.band_high_hz = band(1);
  if (!(band(0) > 0.0 && band(1) > band(0)))
    model.fail("band_hz", "expected two rising frequencies above zero");
  fit.reduced_chi_square = model.number("reduced_chi_square");
  fit.residual_degrees_of_freedom = model.number("residual_degrees_of_freedom");
  fit.points = model.count("points");
  fit.iterations = model.count("iterations");
  fit.warnings = model.texts("warnings");
  return fit;
}

AxisResult& axis_result(const ResultObject& axes, const std::string& name, IdentifyResult& result) {
  const auto found = result.axes.find(axis_of(axes, name));
  if (found == result.axes.end()) {
    axes.fail(name, "responses.json holds no response of this axis", "Run `hoverwright identify` again.");
  }
  return found->second;
}

bool same_run(const Provenance& one, const Provenance& other) {
  return one.program_version == other.program_version && one.command == other.command &&
         one.inputs == other.inputs;
}

}  // namespace

std::string models_to_json(const IdentifyResult& result, const Provenance& provenance) {
  OrderedJson file = file_head(kModelsFormat, result.vehicle_name, provenance);
  file["warnings"] = result.warnings;
  OrderedJson axes = OrderedJson::object();
  OrderedJson without_model = OrderedJson::object();
  for (const auto& [axis, found] : result.axes) {
    const std::string name(ident::axis_name(axis));
    if (found.model) {
      axes[name] = model_json(*found.model, found.validation);
    } else {
      without_model[name] = found.no_model_reason;
    }
  }
  file["axes"] = axes;
  file["without_model"] = without_model;
  return result_text(file);
}

void read_models(ResultObject file, const Provenance& responses_provenance, IdentifyResult& result) {
  const FileHead head = read_head(file, kModelsFormat);
  if (head.vehicle_name != result.vehicle_name || !same_run(head.provenance, responses_provenance)) {
    file.fail("provenance", "the models are not from the run that wrote the responses beside them",
              "Run `hoverwright identify` again, or remove the models file.");
  }
  file.texts("warnings");  // the same as in responses.json, repeated for programs that read only this file
  ResultObject axes = file.object("axes");
  for (const std::string& name : axes.keys()) {
    AxisResult& axis = axis_result(axes, name, result);
    ResultObject model = axes.object(name);
    axis.model = read_model(model);
    axis.validation = read_validation(model);
    model.finish();
  }
  ResultObject without_model = file.object("without_model");
  for (const std::string& name : without_model.keys()) {
    axis_result(without_model, name, result).no_model_reason = without_model.text_or_empty(name);
  }
  file.finish();
}

}  // namespace hoverwright::reports
