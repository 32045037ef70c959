// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/cascade_model.h"

#include <Eigen/Eigenvalues>
#include <array>
#include <cmath>
#include <complex>
#include <numbers>

#include "ident/failure.h"
#include "ident/loops/discrete_filters.h"

namespace hoverwright::ident {
namespace {

using Complex = std::complex<double>;

/// Difference equation of the gyro filter, transposed form II, read from the impulse response of the filter
/// that flies: with h its first samples, h[k] + a1 h[k-1] + a2 h[k-2] = 0 for k > 2.
struct FilterEquation {
  double b0, b1, b2, a1, a2;

  FilterEquation(double cutoff_hz, double sample_rate_hz) {
    LowPass2 filter(cutoff_hz, sample_rate_hz);
    std::array<double, 5> h{};
    for (std::size_t k = 0; k < h.size(); ++k) h[k] = filter.step(k == 0 ? 1.0 : 0.0);
    const double determinant = h[2] * h[2] - h[1] * h[3];
    a1 = (h[1] * h[4] - h[2] * h[3]) / determinant;
    a2 = (h[3] * h[3] - h[2] * h[4]) / determinant;
    b0 = h[0];
    b1 = h[1] + a1 * h[0];
    b2 = h[2] + a1 * h[1] + a2 * h[0];
  }
};

/// One sample of the closed loop, without limits, as a linear map of its state: plant, gyro filter, then the
/// memories each controller uses. A memory nothing reads would leave a pole at one that is not in the loop.
class ClosedLoop {
 public:
  ClosedLoop(const CascadeSetup& setup, const SampledStateSpace& plant, const std::vector<LoopGains>& gains,
             std::size_t depth)
      : gains_(gains.begin(), gains.begin() + static_cast<std::ptrdiff_t>(depth)),
        interval_s_(1.0 / plant.sample_rate_hz) {
    const Eigen::Index levels = static_cast<Eigen::Index>(depth), outside = plant.c.rows() - levels;
    plant_states_ = plant.a.rows() - outside;
    a_ = plant.a.bottomRightCorner(plant_states_, plant_states_);
    b_ = plant.b.bottomRows(plant_states_);
    c_ = plant.c.topRightCorner(levels, plant_states_);
    d_ = plant.d.topRows(levels);
    if (!d_.isZero(0.0))
      throw Failure(FailureKind::internal_error, "the demand acts on the output without delay", "closed loop",
                    "");
    if (setup.gyro_filter_hz && setup.axis != Axis::heave)
      filter_.emplace(*setup.gyro_filter_hz, setup.sample_rate_hz);
    for (std::size_t i = 0; i < depth; ++i) factors_.push_back(output_factor(setup.axis, i));
    size_ = plant_states_ + (filter_ ? 2 : 0);
    for (const LoopGains& loop : gains_) size_ += (loop.ki != 0.0 ? 1 : 0) + (loop.kd != 0.0 ? 2 : 0);
  }

  [[nodiscard]] Eigen::Index size() const { return size_; }

  [[nodiscard]] Eigen::VectorXd step(const Eigen::VectorXd& state) const {
    Eigen::VectorXd next(size_);
    Eigen::VectorXd measured = c_ * state.head(plant_states_);
    Eigen::Index at = plant_states_;
    if (filter_) {
      const double filtered = filter_->b0 * measured[0] + state[at];
      next[at] = filter_->b1 * measured[0] - filter_->a1 * filtered + state[at + 1];
      next[at + 1] = filter_->b2 * measured[0] - filter_->a2 * filtered;
      measured[0] = filtered;
      at += 2;
    }
    double set_point = 0.0;
    for (std::size_t i = gains_.size(); i-- > 0;)
      set_point = factors_[i] *
                  control(gains_[i], set_point, measured[static_cast<Eigen::Index>(i)], state, next, at);
    next.head(plant_states_) = a_ * state.head(plant_states_) + b_ * set_point;
    return next;
  }

 private:
  /// Pid::step without limits on the memories at `at`, which moves on.
  double control(const LoopGains& loop, double set_point, double measurement, const Eigen::VectorXd& state,
                 Eigen::VectorXd& next, Eigen::Index& at) const {
    const double error = set_point - measurement;
    double output = loop.kp * error;
    if (loop.ki != 0.0) {
      output += state[at];
      next[at] = state[at] + loop.ki * interval_s_ * error;
      at += 1;
    }
    if (loop.kd != 0.0) {
      const double alpha =
          std::exp(-2.0 * std::numbers::pi * loop.derivative_cutoff_hz.value() * interval_s_);
      next[at] = alpha * state[at] + (1.0 - alpha) * (measurement - state[at + 1]) / interval_s_;
      next[at + 1] = measurement;
      output -= loop.kd * next[at];
      at += 2;
    }
    return output;
  }

  std::vector<LoopGains> gains_;
  std::vector<double> factors_;
  double interval_s_;
  Eigen::MatrixXd a_, b_, c_, d_;
  std::optional<FilterEquation> filter_;
  Eigen::Index plant_states_ = 0, size_ = 0;
};

}  // namespace

Eigen::MatrixXcd plant_responses(const SampledStateSpace& plant, const Eigen::VectorXd& frequency_hz) {
  // cascade_plant keeps A upper triangular: (zI - A) x = B by back substitution.
  const Eigen::Index size = plant.a.rows();
  Eigen::MatrixXcd responses(frequency_hz.size(), plant.c.rows());
  Eigen::VectorXcd state(size);
  for (Eigen::Index k = 0; k < frequency_hz.size(); ++k) {
    const Complex z = std::polar(1.0, 2.0 * std::numbers::pi * frequency_hz[k] / plant.sample_rate_hz);
    for (Eigen::Index i = size - 1; i >= 0; --i) {
      Complex sum = plant.b(i, 0);
      for (Eigen::Index j = i + 1; j < size; ++j) sum += plant.a(i, j) * state[j];
      state[i] = sum / (z - plant.a(i, i));
    }
    responses.row(k) = (plant.c * state).transpose();
  }
  return responses;
}

ControllerResponse controller_response(const LoopGains& gains, double sample_rate_hz, double factor,
                                       const Eigen::VectorXd& frequency_hz) {
  const Pid pid(gains, sample_rate_hz);
  ControllerResponse response{Eigen::VectorXcd(frequency_hz.size()), Eigen::VectorXcd(frequency_hz.size())};
  for (Eigen::Index k = 0; k < frequency_hz.size(); ++k) {
    response.error[k] = factor * pid.error_response(frequency_hz[k]);
    response.derivative[k] = factor * pid.derivative_response(frequency_hz[k]);
  }
  return response;
}

Eigen::VectorXcd gyro_filter_response(const CascadeSetup& setup, const Eigen::VectorXd& frequency_hz) {
  Eigen::VectorXcd response = Eigen::VectorXcd::Ones(frequency_hz.size());
  if (!setup.gyro_filter_hz || setup.axis == Axis::heave) return response;
  const LowPass2 filter(*setup.gyro_filter_hz, setup.sample_rate_hz);
  for (Eigen::Index k = 0; k < frequency_hz.size(); ++k) response[k] = filter.response(frequency_hz[k]);
  return response;
}

CascadeGains cascade_gains(const Eigen::MatrixXcd& plant, const Eigen::VectorXcd& gyro_filter,
                           const std::vector<ControllerResponse>& controllers) {
  CascadeGains gains;
  Eigen::ArrayXcd inside =
      Eigen::ArrayXcd::Ones(plant.rows());  // Q: set point of the loop inside to the demand
  Eigen::ArrayXcd product = Eigen::ArrayXcd::Ones(plant.rows());
  for (std::size_t i = 0; i < controllers.size(); ++i) {
    Eigen::ArrayXcd loop = inside * plant.col(static_cast<Eigen::Index>(i)).array() *
                           (controllers[i].error + controllers[i].derivative).array();
    if (i == 0) loop *= gyro_filter.array();
    gains.loops.emplace_back(loop.matrix());
    inside = inside * controllers[i].error.array() / (1.0 + loop);
    product *= 1.0 + loop;
  }
  gains.demand = (product - 1.0).matrix();
  return gains;
}

Eigen::MatrixXd closed_loop_matrix(const CascadeSetup& setup, const SampledStateSpace& plant,
                                   const std::vector<LoopGains>& gains, std::size_t depth) {
  const ClosedLoop loop(setup, plant, gains, depth);
  Eigen::MatrixXd matrix(loop.size(), loop.size());
  for (Eigen::Index i = 0; i < loop.size(); ++i)
    matrix.col(i) = loop.step(Eigen::VectorXd::Unit(loop.size(), i));
  return matrix;
}

double spectral_radius(const CascadeSetup& setup, const SampledStateSpace& plant,
                       const std::vector<LoopGains>& gains, std::size_t depth) {
  const Eigen::EigenSolver<Eigen::MatrixXd> solver(closed_loop_matrix(setup, plant, gains, depth), false);
  if (solver.info() != Eigen::Success)
    throw Failure(FailureKind::internal_error, "eigenvalues did not converge", "closed loop", "");
  return solver.eigenvalues().cwiseAbs().maxCoeff();
}

}  // namespace hoverwright::ident
