// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/discrete_filters.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>

#include "ident/failure.h"

namespace hoverwright::ident {

namespace {

using std::numbers::pi;

/// z⁻¹ = exp(-jωΔ).
std::complex<double> one_sample_back(double frequency_hz, double interval_s) {
  return std::polar(1.0, -2.0 * pi * frequency_hz * interval_s);
}

}  // namespace

LowPass2::LowPass2(double cutoff_hz, double sample_rate_hz) : rate_hz_(sample_rate_hz) {
  if (!(sample_rate_hz > 0.0) || !(cutoff_hz > 0.0) || !(cutoff_hz < sample_rate_hz / 2.0)) {
    throw Failure(
        FailureKind::bad_input,
        fmt::format("a low-pass cutoff of {} Hz does not lie between 0 and half the sample rate of {} Hz",
                    cutoff_hz, sample_rate_hz),
        "", "choose a cutoff below half the loop rate, or leave the filter out");
  }
  // Prototype 1/(s² + √2 s + 1) with s = (1/k)(1 - z⁻¹)/(1 + z⁻¹): exact -3 dB at the cutoff.
  const double k = std::tan(pi * cutoff_hz / sample_rate_hz);
  const double scale = 1.0 / (1.0 + std::numbers::sqrt2 * k + k * k);
  b0_ = k * k * scale;
  b1_ = 2.0 * b0_;
  b2_ = b0_;
  a1_ = 2.0 * (k * k - 1.0) * scale;
  a2_ = (1.0 - std::numbers::sqrt2 * k + k * k) * scale;
}

double LowPass2::step(double input) {
  const double output = b0_ * input + s1_;
  s1_ = b1_ * input - a1_ * output + s2_;
  s2_ = b2_ * input - a2_ * output;
  return output;
}

void LowPass2::reset(double value) {
  s2_ = (b2_ - a2_) * value;
  s1_ = (b1_ - a1_) * value + s2_;
}

std::complex<double> LowPass2::response(double frequency_hz) const {
  const std::complex<double> q = one_sample_back(frequency_hz, 1.0 / rate_hz_);
  return (b0_ + q * (b1_ + q * b2_)) / (1.0 + q * (a1_ + q * a2_));
}

Pid::Pid(const LoopGains& gains, double sample_rate_hz)
    : gains_(gains), interval_s_(1.0 / sample_rate_hz), alpha_(0.0) {
  if (!(sample_rate_hz > 0.0)) {
    throw Failure(FailureKind::bad_input, fmt::format("a loop cannot run at {} Hz", sample_rate_hz), "", "");
  }
  if (gains.limit && !(*gains.limit > 0.0)) {
    throw Failure(FailureKind::bad_input,
                  fmt::format("a loop output limit of {} leaves no output", *gains.limit), "",
                  "give a positive limit or none");
  }
  if (gains.derivative_cutoff_hz && !(*gains.derivative_cutoff_hz > 0.0)) {
    throw Failure(FailureKind::bad_input,
                  fmt::format("a derivative cutoff of {} Hz is not positive", *gains.derivative_cutoff_hz),
                  "", "");
  }
  if (gains.kd != 0.0 && !gains.derivative_cutoff_hz) {
    throw Failure(FailureKind::bad_input, "a loop has kd but no derivative_cutoff_hz", "",
                  "give derivative_cutoff_hz, or set kd to 0");
  }
  if (gains.derivative_cutoff_hz) alpha_ = std::exp(-2.0 * pi * *gains.derivative_cutoff_hz * interval_s_);
}

double Pid::step(double set_point, double measurement) {
  const double error = set_point - measurement;
  derivative_ = alpha_ * derivative_ + (1.0 - alpha_) * (measurement - last_measurement_) / interval_s_;
  last_measurement_ = measurement;

  const double wanted = gains_.kp * error + integral_ - gains_.kd * derivative_;
  const double output = gains_.limit ? std::clamp(wanted, -*gains_.limit, *gains_.limit) : wanted;

  const double growth = gains_.ki * interval_s_ * error;
  const bool pushes_further = gains_.limit && std::abs(wanted) >= *gains_.limit && growth * wanted > 0.0;
  if (!pushes_further) integral_ += growth;
  return output;
}

void Pid::reset(double measurement, double integral) {
  integral_ = integral;
  derivative_ = 0.0;
  last_measurement_ = measurement;
}

std::complex<double> Pid::error_response(double frequency_hz) const {
  if (gains_.ki == 0.0) return gains_.kp;  // no pole at zero frequency then
  const std::complex<double> q = one_sample_back(frequency_hz, interval_s_);
  return gains_.kp + gains_.ki * interval_s_ * q / (1.0 - q);
}

std::complex<double> Pid::derivative_response(double frequency_hz) const {
  const std::complex<double> q = one_sample_back(frequency_hz, interval_s_);
  return gains_.kd * (1.0 - alpha_) * (1.0 - q) / interval_s_ / (1.0 - alpha_ * q);
}

}  // namespace hoverwright::ident
