// SPDX-License-Identifier: GPL-3.0-or-later
#include <Eigen/Dense>
#include <catch2/catch.hpp>
#include <cmath>
#include <filesystem>
#include <fstream>
#include <sstream>

#include "ident/fitting/model_fit.h"
#include "tests/ident/fitting/synthetic_axis.h"
#include "tests/run_script.h"

using namespace hoverwright::ident;
using namespace hoverwright::tests;

namespace {

void write_points(const std::filesystem::path& path, const FrequencyResponse& points,
                  const std::string& structure, const Eigen::VectorXd& start) {
  std::ofstream file(path);
  file.precision(17);
  file << structure << '\n' << points.sample_rate_hz << '\n' << start.transpose() << '\n';
  for (Eigen::Index k = 0; k < points.points(); ++k) {
    const PairNoise& n = points.noise[static_cast<std::size_t>(k)];
    file << points.frequency_hz[k] << ' ' << points.a[k].real() << ' ' << points.a[k].imag() << ' '
         << points.b[k].real() << ' ' << points.b[k].imag() << ' ' << n.aa << ' ' << n.bb << ' '
         << n.ab.real() << ' ' << n.ab.imag() << '\n';
  }
}

}  // namespace

TEST_CASE("fit: optimum equals scipy.optimize.least_squares, response equals scipy.signal.cont2discrete",
          "[external]") {
  const SyntheticAxis damped{"rate_damped", values({55, 0.8, 0.0117}), 0.2, 0.2, false};
  const SyntheticAxis climb{"climb_rate", values({24, 0.8, 0.05, 0.0083}), 0.1, 0.05, false};
  SyntheticAxis quick = heave_axis();
  quick.parameters[3] = 0.0046;
  quick.sample_rate_hz = 150.0;
  std::mt19937_64 engine(31);
  const TemporaryFolder folder;
  for (const SyntheticAxis& axis : {damped, roll_axis(), yaw_axis(), heave_axis(), climb, quick}) {
    INFO(axis.structure << " at " << axis.sample_rate_hz << " Hz");
    const Structure& structure = Structure::find(axis.structure);
    const FrequencyResponse points = noisy_points(axis, exact_points(axis, true), true, engine);
    const ModelFit fit = fit_model(points, structure);
    REQUIRE(fit.status == FitStatus::converged);

    const auto path = folder.path() / "points.txt";
    write_points(path, points, axis.structure, axis.parameters);
    const ScriptResult script = run_script(
        kPython + " " HOVERWRIGHT_SOURCE_DIR "/tests/external/fitting/scipy_fit.py " + path.string());
    INFO(script.output.substr(0, 500));
    REQUIRE(script.exit_code == 0);
    std::istringstream text(script.output);
    for (const auto& parameter : fit.parameters) {
      double reference = 0.0;
      REQUIRE(text >> reference);
      INFO(parameter.name);
      CHECK(parameter.value == Approx(reference).epsilon(1e-6));
    }
    double cost = 0.0;
    REQUIRE(text >> cost);
    // Both at a minimum: the difference is second order in parameter differences of 1e-5 standard errors.
    CHECK(fit_cost(points, structure, fit.values()) == Approx(cost).epsilon(1e-9));

    const Eigen::VectorXcd response =
        structure.sampled_response(axis.parameters, points.frequency_hz, axis.sample_rate_hz);
    Eigen::VectorXd reference(2 * response.size());
    for (double& value : reference) REQUIRE(text >> value);
    for (Eigen::Index k = 0; k < response.size(); ++k) {
      const std::complex<double> expected(reference[k], reference[response.size() + k]);
      // zI - A of the reference is singular to (ωΔ)² ~ 3e-5 at 0.35 Hz: 1e-16 / 3e-5 with some tens of
      // operations.
      CHECK(std::abs(response[k] - expected) < 1e-10 * std::abs(expected));
    }
  }
}
