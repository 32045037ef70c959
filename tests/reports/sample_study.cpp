// SPDX-License-Identifier: GPL-3.0-or-later
#include "tests/reports/sample_study.h"

#include <cmath>
#include <numbers>
#include <random>

namespace hoverwright::tests {
namespace {

using Complex = std::complex<double>;
using ident::Axis;

constexpr double kSampleRateHz = 400.0;
constexpr double kLowHz = 0.3;
constexpr double kStepHz = 0.05;
constexpr Eigen::Index kPoints = 400;

struct AxisPlan {
  Axis axis;
  const char* structure;
  double effectiveness, damping, motor_lag, reaction_lead, delay;
  double rate_gain;    ///< of the loop that was closed while the data were taken
  double gust_output;  ///< relative size of the noise in a at 1 Hz
};

const AxisPlan kPlans[] = {
    {Axis::roll, "rate_motor_lag", 268.0, 1.1, 0.048, 0.0, 0.0094, 0.045, 0.16},
    {Axis::pitch, "rate_motor_lag", 179.0, 0.9, 0.047, 0.0, 0.0091, 0.055, 0.24},
    {Axis::yaw, "yaw_reaction", 10.6, 0.35, 0.049, 0.105, 0.0092, 0.25, 0.45},
    {Axis::heave, "heave_accel", 22.4, 0.82, 0.046, 0.0, 0.0096, 0.02, 0.30},
};

Complex plant(const AxisPlan& plan, double frequency_hz) {
  const Complex s(0.0, 2.0 * std::numbers::pi * frequency_hz);
  Complex response =
      plan.effectiveness / ((s + plan.damping) * (plan.motor_lag * s + 1.0)) * std::exp(-s * plan.delay);
  if (plan.reaction_lead > 0.0) response *= plan.reaction_lead * s + 1.0;
  if (plan.axis == Axis::heave) response *= s;
  return response;
}

ident::FrequencyResponse response_of(const AxisPlan& plan, bool direct_only, std::mt19937_64& random) {
  std::normal_distribution<double> normal(0.0, std::numbers::sqrt2 / 2.0);
  const auto noise = [&] { return Complex(normal(random), normal(random)); };
  ident::FrequencyResponse response;
  response.reference_based = !direct_only;
  response.method = direct_only ? "direct estimate from overlapped windows"
                                : "overlapped windows, referred to the excitation";
  response.settings = "Hann windows of 20 s, half overlapped";
  response.records = 2;
  response.sample_rate_hz = kSampleRateHz;
  response.segments = 14.0;
  response.frequency_hz = Eigen::VectorXd::LinSpaced(kPoints, kLowHz, kLowHz + kStepHz * (kPoints - 1));
  response.a.resize(kPoints);
  response.b.resize(kPoints);
  response.direct.resize(kPoints);
  response.noise.resize(kPoints);
  response.degrees_of_freedom = Eigen::VectorXd::Constant(kPoints, 22.0);
  response.direct_variance.resize(kPoints);
  response.coherence_uy.resize(kPoints);
  response.output_noise_psd.resize(kPoints);
  if (!direct_only) {
    response.coherence_ry.resize(kPoints);
    response.coherence_ru.resize(kPoints);
  }
  for (auto& correlation : response.neighbour_correlation) {
    correlation = Eigen::VectorXcd::Constant(kPoints, Complex(0.45, 0.02));
  }
  for (Eigen::Index k = 0; k < kPoints; ++k) {
    const double frequency = response.frequency_hz(k);
    const Complex truth = plant(plan, frequency);
    const Complex sensitivity = 1.0 / (1.0 + plan.rate_gain * truth);
    // Gusts fall off above 1 Hz; the sweep starves the lowest and the highest frequencies.
    const double gust = plan.gust_output * (0.35 / std::pow(frequency, 1.3) + 0.05 * frequency / 6.0 + 0.05);
    const Complex disturbance = gust * std::abs(truth) * sensitivity;
    ident::PairNoise& covariance = response.noise[static_cast<std::size_t>(k)];
    if (direct_only) {
      response.b(k) = 1.0;
      response.a(k) = truth * (1.0 - 0.3 / (1.0 + frequency)) + 2.0 * std::abs(disturbance) * noise();
      covariance = {4.0 * std::norm(disturbance), 0.0, 0.0};
    } else {
      const Complex draw = noise();
      response.a(k) = truth * sensitivity + disturbance * draw;
      response.b(k) = sensitivity - plan.rate_gain * disturbance * draw;
      covariance = {std::norm(disturbance), std::norm(plan.rate_gain * disturbance),
                    -plan.rate_gain * std::norm(disturbance)};
    }
    response.direct(k) =
        truth * (1.0 - 0.35 / (1.0 + frequency * frequency)) + std::abs(disturbance) * noise();
    response.direct_variance(k) = std::norm(disturbance);
    const double ratio = 14.0 * gust * gust;
    response.coherence_uy(k) = 0.98 / (1.0 + ratio);
    if (!direct_only) {
      response.coherence_ry(k) = 0.97 / (1.0 + 1.6 * ratio);
      response.coherence_ru(k) = 0.99 / (1.0 + 1.2 * ratio);
    }
    response.output_noise_psd(k) = std::norm(disturbance) + 1e-6;
  }
  return response;
}

ident::ParameterEstimate parameter(const char* name, const char* unit, double truth, double relative_error,
                                   double offset) {
  ident::ParameterEstimate estimate;
  estimate.name = name;
  estimate.unit = unit;
  estimate.value = truth * (1.0 + offset * relative_error);
  estimate.standard_error = truth * relative_error;
  estimate.low = estimate.value * std::exp(-1.96 * relative_error);
  estimate.high = estimate.value * std::exp(1.96 * relative_error);
  estimate.identifiable = estimate.high < 10.0 * estimate.low;
  return estimate;
}

ident::ModelFit model_of(const AxisPlan& plan) {
  ident::ModelFit fit;
  fit.status = ident::FitStatus::converged;
  fit.structure = plan.structure;
  fit.sample_rate_hz = kSampleRateHz;
  const char* gain_unit = plan.axis == Axis::heave ? "m/s^2" : "rad/s^2";
  fit.parameters.push_back(parameter("effectiveness", gain_unit, plan.effectiveness, 0.019, 0.4));
  fit.parameters.push_back(
      parameter("damping", "1/s", plan.damping, plan.axis == Axis::yaw ? 0.7 : 0.28, -0.5));
  fit.parameters.push_back(parameter("motor_lag", "s", plan.motor_lag, 0.027, 0.6));
  if (plan.reaction_lead > 0.0)
    fit.parameters.push_back(parameter("reaction_lead", "s", plan.reaction_lead, 0.04, -0.3));
  fit.parameters.push_back(parameter("delay", "s", plan.delay, 0.02, 0.2));
  const Eigen::Index size = static_cast<Eigen::Index>(fit.parameters.size());
  fit.covariance = Eigen::MatrixXd::Zero(size, size);
  fit.fitted_covariance = Eigen::MatrixXd::Zero(size, size);
  for (Eigen::Index i = 0; i < size; ++i) {
    const ident::ParameterEstimate& estimate = fit.parameters[static_cast<std::size_t>(i)];
    for (Eigen::Index j = 0; j < size; ++j) {
      const ident::ParameterEstimate& other = fit.parameters[static_cast<std::size_t>(j)];
      const double correlation = i == j ? 1.0 : 0.3;
      fit.covariance(i, j) = correlation * estimate.standard_error * other.standard_error;
      // The delay is fitted as it is, all others as their logarithm.
      const double scale_i = i + 1 == size ? 1.0 : estimate.value;
      const double scale_j = j + 1 == size ? 1.0 : other.value;
      fit.fitted_covariance(i, j) = fit.covariance(i, j) / (scale_i * scale_j);
    }
  }
  fit.reduced_chi_square = plan.axis == Axis::pitch ? 1.62 : 1.07;
  fit.residual_degrees_of_freedom = 310.0;
  fit.points = static_cast<int>(kPoints);
  fit.iterations = 9;
  fit.band_low_hz = kLowHz;
  fit.band_high_hz = kLowHz + kStepHz * (kPoints - 1);
  if (plan.axis == Axis::pitch)
    fit.warnings.emplace_back("the residual is larger than noise between 9 and 12 Hz");
  return fit;
}

ident::ValidationResult validation_of(const AxisPlan& plan, std::mt19937_64& random) {
  std::normal_distribution<double> normal;
  constexpr Eigen::Index kSamples = 2400;
  ident::ValidationResult record;
  record.time_s = Eigen::VectorXd::LinSpaced(kSamples, 0.0, (kSamples - 1) / kSampleRateHz);
  record.simulated.resize(kSamples);
  record.measured.resize(kSamples);
  double rate = 0.0;
  double torque = 0.0;
  double gust = 0.0;
  for (Eigen::Index k = 0; k < kSamples; ++k) {
    const double time = record.time_s(k);
    const double demand = time < 1.0 || time > 2.2 ? 0.0 : (time < 1.6 ? 0.02 : -0.02);
    torque += (demand - torque) / (plan.motor_lag * kSampleRateHz);
    const double change = (plan.effectiveness * torque - (plan.damping + 2.0) * rate) / kSampleRateHz;
    rate += change;
    gust += -gust / 200.0 + 0.0025 * normal(random) * plan.effectiveness / 40.0;
    record.simulated(k) = rate;
    record.measured(k) = rate + gust + 0.01 * normal(random);
  }
  const double error = (record.measured - record.simulated).norm();
  record.fit_percent =
      100.0 * (1.0 - error / (record.measured.array() - record.measured.mean()).matrix().norm());
  record.theil_inequality = error / (record.measured.norm() + record.simulated.norm());
  return record;
}

ident::Range range(double nominal, double half_width) {
  return {nominal, nominal - half_width, nominal + 0.9 * half_width};
}

ident::MarginRanges margins(double gain_db, double phase_deg, double peak, double crossover_hz,
                            double share) {
  ident::MarginRanges ranges;
  ranges.gain_margin_db = range(gain_db, 0.6);
  ranges.phase_margin_deg = range(phase_deg, 3.4);
  ranges.sensitivity_peak = range(peak, 0.11);
  ranges.crossover_hz = range(crossover_hz, 0.06 * crossover_hz);
  ranges.stable_share = 1.0;
  ranges.meets_share = share;
  return ranges;
}

ident::LoopRecommendation tuned(ident::Loop loop, const ident::LoopGains& present,
                                const ident::MarginRanges& present_margins,
                                const ident::LoopGains& recommended,
                                const ident::MarginRanges& recommended_margins, const char* binding) {
  ident::LoopRecommendation recommendation;
  recommendation.loop = loop;
  recommendation.present = present;
  recommendation.present_margins = present_margins;
  recommendation.recommended = recommended;
  recommendation.recommended_margins = recommended_margins;
  recommendation.binding = binding;
  return recommendation;
}

ident::LoopRecommendation untouched(ident::Loop loop, const ident::LoopGains& present,
                                    const ident::MarginRanges& present_margins, const char* note) {
  ident::LoopRecommendation recommendation;
  recommendation.loop = loop;
  recommendation.present = present;
  recommendation.present_margins = present_margins;
  recommendation.note = note;
  return recommendation;
}

ident::AxisRecommendation attitude_axis(Axis axis, ident::Loop rate, ident::Loop angle, ident::Loop velocity,
                                        ident::Loop position) {
  ident::AxisRecommendation recommendation;
  recommendation.axis = axis;
  recommendation.loops.push_back(tuned(rate, {0.055, 0.06, 0.0, {}, 0.3}, margins(5.1, 38.0, 2.31, 3.3, 0.02),
                                       {0.041, 0.11, 0.0012, 60.0, 0.3}, margins(7.6, 47.2, 1.86, 2.4, 0.965),
                                       "phase margin in 95 % of the draws"));
  recommendation.loops.push_back(tuned(angle, {3.0, 0.0, 0.0, {}, 1.5}, margins(9.1, 61.0, 1.62, 0.52, 1.0),
                                       {4.1, 0.0, 0.0, {}, 1.5}, margins(7.1, 52.4, 1.93, 0.78, 0.955),
                                       "sensitivity peak"));
  recommendation.loops.push_back(untouched(velocity, {1.2, 0.25, 0.0, {}, 3.5},
                                           margins(8.2, 49.0, 1.7, 0.3, 0.97),
                                           "outer loops are not tuned in this release"));
  ident::MarginRanges slow = margins(12.0, 66.0, 1.3, 0.1, 1.0);
  slow.crossover_hz.reset();
  slow.phase_margin_deg.reset();
  recommendation.loops.push_back(
      untouched(position, {0.5, 0.0, 0.0, {}, 2.0}, slow,
                "crosses over below the measured band, so its phase margin is not read"));
  recommendation.present_at_demand = margins(4.9, 36.0, 2.4, 3.6, 0.01);
  recommendation.recommended_at_demand = margins(7.2, 46.1, 1.91, 2.7, 0.955);
  return recommendation;
}

}  // namespace

reports::IdentifyResult sample_identify(const SampleOptions& options) {
  std::mt19937_64 random(20240611);
  reports::IdentifyResult result;
  result.vehicle_name = "Tern";
  for (const AxisPlan& plan : kPlans) {
    reports::AxisResult& axis = result.axes[plan.axis];
    axis.response = response_of(plan, options.direct_only, random);
    if (options.direct_only) {
      axis.no_model_reason =
          "no excitation was logged, so only the direct estimate exists and feedback biases it; fly a "
          "schedule and log its excitation";
      continue;
    }
    axis.feedback_bias = {plan.axis != Axis::heave, 0.3, 1.4, 0.23};
    if (!options.with_models) {
      axis.no_model_reason = "the fit did not converge; fly longer records";
      continue;
    }
    axis.model = model_of(plan);
    if (options.with_validation) axis.validation.push_back(validation_of(plan, random));
  }
  if (!options.direct_only) {
    result.warnings.emplace_back(
        "roll: the direct estimate demand-to-output is off by 23 % (median) over 0.30-1.4 Hz, beyond both "
        "error bands: feedback bias. "
        "The reference-based response shown is not affected.");
  }
  return result;
}

reports::GainsResult sample_gains() {
  using ident::Loop;
  reports::GainsResult result;
  result.vehicle_name = "Tern";
  result.axes[Axis::roll] =
      attitude_axis(Axis::roll, Loop::roll_rate, Loop::roll_angle, Loop::velocity_y, Loop::position_y);
  result.axes[Axis::pitch] =
      attitude_axis(Axis::pitch, Loop::pitch_rate, Loop::pitch_angle, Loop::velocity_x, Loop::position_x);
  ident::AxisRecommendation yaw;
  yaw.axis = Axis::yaw;
  yaw.loops.push_back(tuned(Loop::yaw_rate, {0.25, 0.15, 0.0, {}, 0.3}, margins(14.2, 71.0, 1.31, 0.6, 1.0),
                            {0.61, 0.4, 0.0, {}, 0.3}, margins(6.0, 55.0, 1.99, 1.4, 0.951), "gain margin"));
  yaw.loops.push_back(tuned(Loop::heading, {1.2, 0.0, 0.0, {}, 0.8}, margins(11.0, 60.0, 1.5, 0.2, 1.0),
                            {1.9, 0.0, 0.0, {}, 0.8}, margins(8.2, 51.0, 1.8, 0.33, 0.96), "phase margin"));
  yaw.present_at_demand = margins(13.0, 66.0, 1.4, 0.7, 1.0);
  yaw.recommended_at_demand = margins(6.1, 50.0, 1.98, 1.5, 0.95);
  result.axes[Axis::yaw] = yaw;
  ident::AxisRecommendation heave;
  heave.axis = Axis::heave;
  ident::MarginRanges shaky = margins(2.1, 17.0, 3.9, 1.9, 0.0);
  shaky.stable_share = 0.97;
  heave.loops.push_back(untouched(Loop::climb_rate, {0.1, 0.05, 0.0, {}, 0.3}, shaky,
                                  "outer loops are not tuned in this release"));
  heave.loops.push_back(
      untouched(Loop::altitude, {0.8, 0.0, 0.0, {}, 1.5}, margins(9.9, 58.0, 1.5, 0.2, 0.99), ""));
  heave.present_at_demand = shaky;
  heave.warnings.emplace_back("the present climb-rate loop is close to the border of stability");
  result.axes[Axis::heave] = heave;
  result.warnings.emplace_back("heave: the present climb-rate loop is close to the border of stability");
  return result;
}

reports::Provenance sample_provenance() {
  return {"0.1.0",
          "identify --low 0.3",
          {{"vehicle.json", "9f86d081884c7d659a2feaa0c55ad015a3bf4f1b2b0b822cd15d6c15b0f00a08"},
           {"logs/flight.csv", "60303ae22b998861bce3b28f33eec1be758a213c86c93c076dbe9f558c11c752"}}};
}

}  // namespace hoverwright::tests
