// SPDX-License-Identifier: GPL-3.0-or-later
#include "roll_loop.h"

#include <array>
#include <cmath>
#include <numbers>

namespace hoverwright::tests {
namespace {

constexpr double kPi = std::numbers::pi;
constexpr double kEffectiveness = 55.0, kDamping = 0.8, kMotorLag = 0.045;
constexpr double kRateP = 0.22, kRateI = 0.25, kAngleP = 3.0, kGustCornerHz = 1.0;
constexpr double kStep = 1.0 / RollLoop::kRateHz;
constexpr int kWholeDelay = 4;              // the delay of 0.012 s is 4.8 samples
constexpr double kPartDelay = 0.8 * kStep;  // the rest of it

/// Motor state and rate after t seconds: start (motor, rate), demand and torque held.
struct Motion {
  double motor = 0.0, rate = 0.0;
};

Motion advance(const Motion& start, double demand, double torque, double t) {
  const double b = 1.0 / kMotorLag, a = kDamping;
  const double eb = std::exp(-b * t), ea = std::exp(-a * t);
  Motion end;
  end.motor = eb * start.motor + (1.0 - eb) * demand;
  end.rate = ea * start.rate + kEffectiveness * (eb - ea) / (a - b) * start.motor +
             kEffectiveness * b * (1.0 / (a * b) + ea / (a * (a - b)) + eb / (b * (b - a))) * demand +
             kEffectiveness * (1.0 - ea) / a * torque;
  return end;
}

}  // namespace

Eigen::VectorXd quiet_chirp(double low_hz, double high_hz, double duration_s, double amplitude,
                            double rate_hz) {
  const auto quiet = static_cast<Eigen::Index>(3.0 * rate_hz);
  const auto active = static_cast<Eigen::Index>(duration_s * rate_hz);
  const double hold_s = 1.0 / low_hz, sweep_s = duration_s - hold_s, growth = std::log(high_hz / low_hz);
  Eigen::VectorXd signal = Eigen::VectorXd::Zero(active + 2 * quiet);
  for (Eigen::Index n = 0; n < active; ++n) {
    const double t = static_cast<double>(n) / rate_hz, s = t - hold_s;
    const double phase = s < 0.0
                             ? 2.0 * kPi * low_hz * t
                             : 2.0 * kPi * low_hz * sweep_s / growth * (std::exp(growth * s / sweep_s) - 1.0);
    const double edge = std::min({1.0, t / 2.0, (duration_s - t) / 0.5});  // fades of 2 s and 0.5 s
    signal[quiet + n] = amplitude * (0.5 - 0.5 * std::cos(kPi * edge)) * std::sin(phase);
  }
  return signal;
}

RollLoop::RollLoop(bool closed) : closed_(closed) {}

ident::RecordSignals RollLoop::fly(const Eigen::VectorXd& excitation, const Disturbance& disturbance,
                                   std::mt19937_64& random) const {
  // The step's coefficients, from unit inputs.
  const auto column = [](const Motion& start, double demand, double torque, double t) {
    return advance(start, demand, torque, t);
  };
  const Motion from_motor = column({1.0, 0.0}, 0.0, 0.0, kStep),
               from_rate = column({0.0, 1.0}, 0.0, 0.0, kStep);
  const Motion from_old = column(column({}, 1.0, 0.0, kPartDelay), 0.0, 0.0, kStep - kPartDelay);
  const Motion from_new = column({}, 1.0, 0.0, kStep - kPartDelay), from_torque = column({}, 0.0, 1.0, kStep);

  const auto lead_in = static_cast<Eigen::Index>(2.0 * kRateHz);
  const double memory = std::exp(-2.0 * kPi * kGustCornerHz * kStep);
  std::normal_distribution<double> normal;
  double gust = disturbance.gust * normal(random);
  Motion motion;
  double angle = 0.0, integral = 0.0;
  std::array<double, kWholeDelay + 2> demand{};  // demand[j] is j samples old
  ident::RecordSignals record{excitation, Eigen::VectorXd(excitation.size()),
                              Eigen::VectorXd(excitation.size())};
  for (Eigen::Index k = -lead_in; k < excitation.size(); ++k) {
    const double gyro = motion.rate + disturbance.gyro * normal(random);
    const double error = -kAngleP * angle - gyro;
    const double feedback = closed_ ? kRateP * error + integral : 0.0;
    for (std::size_t j = demand.size() - 1; j > 0; --j) demand[j] = demand[j - 1];
    demand[0] = (k >= 0 ? excitation[k] : 0.0) + feedback;
    angle += kStep * gyro;
    integral += kRateI * kStep * error;
    if (k >= 0) {
      record.demand[k] = demand[0];
      record.output[k] = gyro;
    }
    const Motion now = motion;
    const double newer = demand[kWholeDelay], older = demand[kWholeDelay + 1];
    motion.motor = from_motor.motor * now.motor + from_old.motor * older + from_new.motor * newer;
    motion.rate = from_motor.rate * now.motor + from_rate.rate * now.rate + from_old.rate * older +
                  from_new.rate * newer + from_torque.rate * gust;
    gust = memory * gust + std::sqrt(1.0 - memory * memory) * disturbance.gust * normal(random);
  }
  return record;
}

std::complex<double> RollLoop::truth(double frequency_hz) {
  const double a = kDamping, b = 1.0 / kMotorLag;
  const std::complex<double> back = std::polar(1.0, -2.0 * kPi * frequency_hz * kStep);  // one sample's delay
  const double rest = kStep - kPartDelay;  // time from a demand's arrival to the next sample
  const std::complex<double> step =
      kEffectiveness * b *
      (1.0 / (a * b * (1.0 - back)) +
       std::exp(-a * rest) / (a * (a - b) * (1.0 - std::exp(-a * kStep) * back)) +
       std::exp(-b * rest) / (b * (b - a) * (1.0 - std::exp(-b * kStep) * back)));
  return (1.0 - back) * std::pow(back, kWholeDelay + 1) * step;
}

double gust_for_ratio(const RollLoop& loop, const Eigen::VectorXd& excitation, double ratio) {
  std::mt19937_64 random(1);
  const Eigen::VectorXd excited = loop.fly(excitation, {}, random).output;
  const auto quiet = static_cast<Eigen::Index>(3.0 * RollLoop::kRateHz);
  const double excited_rms = std::sqrt(excited.segment(quiet, excited.size() - 2 * quiet).squaredNorm() /
                                       static_cast<double>(excited.size() - 2 * quiet));
  // 1000 s of gusts: about 4000 independent samples of the rate's power, 2 % on the rms.
  const Eigen::VectorXd blown = loop.fly(Eigen::VectorXd::Zero(400000), {1.0, 0.0}, random).output;
  return ratio * excited_rms / std::sqrt(blown.squaredNorm() / static_cast<double>(blown.size()));
}

}  // namespace hoverwright::tests
