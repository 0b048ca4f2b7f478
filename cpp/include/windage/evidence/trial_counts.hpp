// How many trials a claim takes, decided before the first trial is run.
//
// Guarantee: the exact counts are those of the binomial distribution, found by bisection on its tail, which falls with
// the number of trials; no normal or Poisson approximation. Counts above 2^53 are refused with std::invalid_argument.
#pragma once

#include <cstdint>
#include <optional>

namespace windage::evidence {

/// Smallest number of trials of which at most `failures` may fail so that P[X <= failures] is within the risk, where X
/// is binomial with the failure probability at its limit. None above 2^53. Arguments are not checked.
std::optional<std::int64_t> smallest_trials(std::int64_t failures, double failure_limit, double risk);

/// Smallest number of trials such that at most `allowed_failures` of them failing proves, at the given confidence, that
/// a trial passes with at least the given probability. Hanson & Beard 2010, "Applying Monte Carlo Simulation to Launch
/// Vehicle Design and Requirements Analysis", NASA/TP-2010-216447.
std::int64_t trials_to_demonstrate(double probability, double confidence, std::int64_t allowed_failures);

/// The inverse question: the most failures among the trials with which the claim still holds; none if not even a run
/// without failure would prove it.
std::optional<std::int64_t> allowed_failures(std::int64_t trials, double probability, double confidence);

/// Largest number of trials that shows at most `events` events of the given probability, at the given confidence; 0 if
/// one trial is too many already.
std::int64_t trials_with_at_most(std::int64_t events, double event_probability, double confidence);

/// Trials after which an observed fraction lies within +-accuracy of its probability, at the given confidence and
/// whatever the probability: ceil(ln(2/risk) / (2 accuracy^2)). Hoeffding 1963, "Probability inequalities for sums of
/// bounded random variables", J. Am. Stat. Assoc. 58:13-30; Okamoto 1958, Ann. Inst. Stat. Math. 10:29-35. Far more
/// than an exact claim needs where the probability is near 1.
std::int64_t chernoff_trials(double accuracy, double confidence);

/// Trials after which the largest value seen is exceeded with at most the given probability, at the given confidence:
/// ceil(ln(1/risk) / ln(1/(1 - exceedance))). Tempo, Bai & Dabbene 1997, "Probabilistic robustness analysis: explicit
/// bounds for the minimum number of samples", Syst. Control Lett. 30:237-242.
std::int64_t log_over_log_trials(double exceedance, double confidence);

} // namespace windage::evidence
