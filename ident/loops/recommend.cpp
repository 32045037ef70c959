// SPDX-License-Identifier: GPL-3.0-or-later
#include "ident/loops/recommend.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "ident/failure.h"
#include "ident/loops/drawn_models.h"
#include "ident/loops/gain_problem.h"
#include "ident/loops/gain_search.h"

namespace hoverwright::ident {
namespace {

constexpr double kDerivativeCutoffHz =
    40.0;                                  // where none is flown; common practice for craft of some kilograms
constexpr double kDerivativeWorth = 0.05;  // a derivative gain must buy this much, or it stays zero

void check_inputs(const ModelFit& fit, const GainRequirements& need, Axis axis) {
  if (fit.status != FitStatus::converged)
    throw Failure(FailureKind::unsupported,
                  fmt::format("the {} axis has no usable model: {}", axis_name(axis), fit.reason), "",
                  "identify the axis first");
  if (need.draws < 20 || !(need.share_of_draws > 0.0 && need.share_of_draws <= 1.0))
    throw Failure(FailureKind::bad_input,
                  fmt::format("{} draws, of which a share of {} must meet the requirements", need.draws,
                              need.share_of_draws),
                  "gain requirements", "take at least 20 draws and a share above 0, at most 1");
  if (!(need.gain_margin_db > 0.0) || !(need.phase_margin_deg > 0.0) || !(need.sensitivity_peak > 1.0) ||
      !(need.demand_noise_rms > 0.0))
    throw Failure(FailureKind::bad_input,
                  "margins and noise must be above zero and the sensitivity peak above one",
                  "gain requirements", "");
}

std::vector<Margins> pick(const std::vector<CascadeAnalysis>& analyses, Loop loop) {
  std::vector<Margins> margins;
  for (const CascadeAnalysis& analysis : analyses) margins.push_back(analysis.loops.at(loop));
  return margins;
}

std::vector<Margins> pick_demand(const std::vector<CascadeAnalysis>& analyses) {
  std::vector<Margins> margins;
  for (const CascadeAnalysis& analysis : analyses) margins.push_back(analysis.at_demand);
  return margins;
}

FoundGains with_worthwhile_derivative(const GainProblem& problem, const std::vector<LoopGains>& tuned,
                                      double sample_rate_hz, double phase_margin_deg) {
  // A derivative filter faster than a quarter of the loop rate would be no filter.
  const double cutoff =
      tuned[0].derivative_cutoff_hz.value_or(std::min(kDerivativeCutoffHz, sample_rate_hz / 4.0));
  FoundGains plain = search_gains(problem, tuned, false, cutoff, phase_margin_deg);
  FoundGains derivative = search_gains(problem, tuned, true, cutoff, phase_margin_deg);
  if (!derivative.meets) return plain;
  if (!plain.meets) return derivative;
  return derivative.objective > plain.objective + std::log1p(kDerivativeWorth) ? derivative : plain;
}

/// Why no gains were found, and what to fly.
std::string why_not(const GainProblem& problem, const FoundGains& best, const ModelFit& fit) {
  if (fit.parameter("effectiveness").value < 0.0)
    return "no gains: the effectiveness is negative, demand and output have opposite signs; set the scale of "
           "a channel to -1";
  Eigen::Index nominal = 0, drawn = 0;
  const double nominal_slack = best.evaluation.nominal.minCoeff(&nominal);
  const double drawn_slack = best.evaluation.over_draws.minCoeff(&drawn);
  if (best.nominal_can_meet)
    return fmt::format(
        "no gains: the nominal model would allow some, the model's uncertainty does not; the best found have "
        "{} at the {:.3g} % "
        "draw. Fly a longer or larger excitation between {:.2g} and {:.3g} Hz",
        problem.words(problem.checks()[static_cast<std::size_t>(drawn)], drawn_slack),
        100.0 * (1.0 - problem.share_of_draws()), fit.band_low_hz, fit.band_high_hz);
  const Check& check = problem.checks()[static_cast<std::size_t>(nominal)];
  const std::string found = problem.words(check, nominal_slack);
  if (check.quantity == Quantity::crossover_high || check.quantity == Quantity::gain_margin)
    return fmt::format("no gains: the best found have {}. Fly an excitation that reaches {:.3g} Hz", found,
                       2.0 * fit.band_high_hz);
  if (check.quantity == Quantity::crossover_low)
    return fmt::format("no gains: the best found have {}. Fly an excitation that starts lower", found);
  return fmt::format(
      "no gains: the best found have {}. Less latency or gyro filtering, or a lower requirement, is needed",
      found);
}

class Recommender {
 public:
  Recommender(const CascadeSetup& setup, const LoopGainSet& present, const ModelFit& fit,
              double output_noise_psd, const GainRequirements& need)
      : setup_(setup),
        fit_(fit),
        noise_psd_(output_noise_psd),
        need_(need),
        present_(flown_gains(setup, present)),
        models_(draw_models(setup, fit, need.draws, need.seed)),
        analyses_(analyse_models(setup, models_, present_)) {
    result_.axis = setup.axis;
    if (models_.left_out > 0)
      warn(fmt::format("{} of {} draws left out: their delay is below the half sample any held demand has",
                       models_.left_out, need.draws));
  }

  AxisRecommendation run() {
    describe_present();
    if (setup_.axis != Axis::heave) recommend();
    return std::move(result_);
  }

 private:
  void warn(std::string text) { result_.warnings.push_back(std::move(text)); }

  void describe_present() {
    const std::vector<Loop> loops = loops_of_axis(setup_.axis);
    for (std::size_t i = 0; i < present_.size(); ++i) {
      LoopRecommendation entry;
      entry.loop = loops[i];
      entry.present = present_[i];
      const std::vector<Margins> margins = pick(analyses_, loops[i]);
      entry.present_margins = margin_ranges(margins, need_);
      if (setup_.axis == Axis::heave || i >= 2) entry.note = "margins only: gains of this loop are not tuned";
      if (!margins[0].stable)
        warn(fmt::format("the present gains make {} unstable on the nominal model", loop_name(loops[i])));
      if (margins[0].phase_crossover_hz && *margins[0].phase_crossover_hz > fit_.band_high_hz)
        warn(
            fmt::format("{}: the gain margin is read at {:.1f} Hz, above the measured {:.1f} Hz: it rests on "
                        "the model alone",
                        loop_name(loops[i]), *margins[0].phase_crossover_hz, fit_.band_high_hz));
      result_.loops.push_back(std::move(entry));
    }
    result_.present_at_demand = margin_ranges(pick_demand(analyses_), need_);
  }

  [[nodiscard]] GainProblem problem(bool close_outer) const {
    return GainProblem(setup_, models_, present_, close_outer, fit_.band_low_hz, fit_.band_high_hz,
                       noise_psd_, need_);
  }

  void recommend() {
    if (fit_.parameter("effectiveness").value < 0.0)
      return refuse(
          "no gains: the effectiveness is negative, demand and output have opposite signs; set the scale of "
          "a channel to -1");
    GainProblem whole = problem(true);
    const std::vector<LoopGains> tuned(present_.begin(),
                                       present_.begin() + static_cast<std::ptrdiff_t>(whole.tuned()));
    FoundGains found =
        with_worthwhile_derivative(whole, tuned, setup_.sample_rate_hz, need_.phase_margin_deg);
    if (!found.meets && present_.size() > whole.tuned()) {
      const GainProblem inner = problem(false);
      FoundGains without =
          with_worthwhile_derivative(inner, tuned, setup_.sample_rate_hz, need_.phase_margin_deg);
      if (without.meets) {
        warn(
            "with the present velocity and position loops closed no gains meet the requirements at the "
            "demand; the recommended "
            "ones meet them with rate and angle loops alone. Lower the velocity and position gains");
        found = std::move(without);
      }
    }
    if (!found.meets) return refuse(why_not(whole, found, fit_));
    accept(found);
  }

  void refuse(const std::string& why) {
    for (LoopRecommendation& entry : result_.loops) {
      if (entry.note.empty()) entry.note = why;
    }
  }

  /// Full analysis by poles of what the search found; only gains that pass it are handed out.
  void accept(const FoundGains& found) {
    std::vector<LoopGains> gains = present_;
    std::copy(found.gains.begin(), found.gains.end(), gains.begin());
    const std::vector<CascadeAnalysis> analyses = analyse_models(setup_, models_, gains);
    const std::vector<Loop> loops = loops_of_axis(setup_.axis);
    std::vector<MarginRanges> ranges;
    for (std::size_t i = 0; i < gains.size(); ++i)
      ranges.push_back(margin_ranges(pick(analyses, loops[i]), need_));
    for (std::size_t i = 0; i < found.gains.size(); ++i) {
      if (!analyses[0].loops.at(loops[i]).stable || ranges[i].stable_share < need_.share_of_draws)
        return refuse(fmt::format("no gains: {} is not stable in enough draws", loop_name(loops[i])));
    }
    for (std::size_t i = 0; i < found.gains.size(); ++i) {
      LoopRecommendation& entry = result_.loops[i];
      entry.recommended = found.gains[i];
      entry.recommended_margins = ranges[i];
      entry.binding = found.binding[i];
    }
    note_choices(found);
    result_.recommended_at_demand = margin_ranges(pick_demand(analyses), need_);
    recheck_outer(analyses);
  }

  void note_choices(const FoundGains& found) {
    result_.loops[0].note =
        found.gains[0].kd > 0.0
            ? fmt::format("the derivative is filtered at {:.0f} Hz",
                          found.gains[0].derivative_cutoff_hz.value())
            : fmt::format("kd stays zero: it would buy less than {:.0f} %", 100.0 * kDerivativeWorth);
  }

  /// The loops that keep their gains, around the new inner ones.
  void recheck_outer(const std::vector<CascadeAnalysis>& analyses) {
    for (std::size_t i = 2; i < present_.size(); ++i) {
      const Loop loop = loops_of_axis(setup_.axis)[i];
      const Margins& before = analyses_[0].loops.at(loop);
      const Margins& after = analyses[0].loops.at(loop);
      if (meets(after, need_)) continue;
      const bool worse =
          !after.stable || meets(before, need_) || after.sensitivity_peak > before.sensitivity_peak;
      if (!worse) continue;
      warn(after.stable
               ? fmt::format("{} around the recommended gains has a sensitivity peak of {:.2f} and misses "
                             "the requirements (now {:.2f})",
                             loop_name(loop), after.sensitivity_peak, before.sensitivity_peak)
               : fmt::format("{} is unstable around the recommended gains: lower it before flying them",
                             loop_name(loop)));
    }
    if (present_.size() > 2 && !meets(analyses[0].at_demand, need_))
      warn("at the demand, with all loops closed, the recommended gains miss the requirements");
  }

  const CascadeSetup& setup_;
  const ModelFit& fit_;
  double noise_psd_;
  const GainRequirements& need_;
  std::vector<LoopGains> present_;
  DrawnModels models_;
  std::vector<CascadeAnalysis> analyses_;
  AxisRecommendation result_;
};

}  // namespace

AxisRecommendation recommend_axis(const CascadeSetup& setup, const LoopGainSet& present, const ModelFit& fit,
                                  double output_noise_psd, const GainRequirements& requirements) {
  check_inputs(fit, requirements, setup.axis);
  return Recommender(setup, present, fit, output_noise_psd, requirements).run();
}

}  // namespace hoverwright::ident
