// A claim "at least this fraction of all trials passes, at this confidence": shown, refuted, or what is missing.
//
// Guarantee: whatever the true pass probability, a false claim is shown, or a true one refuted, with probability of at
// most 1 - confidence, if the number of trials was fixed beforehand. Decisions compare the exact binomial tail with the
// risk, which is the same as comparing the Clopper-Pearson bound with the limit but has no inversion in between.
// Deciding again and again while trials come in does NOT keep the confidence.
#pragma once

#include <cstdint>
#include <optional>

namespace windage::evidence {

struct claim {
    double failure_limit; ///< largest failure probability that the claim admits, 1 - at_least
    double risk;          ///< 1 - confidence
};

/// Throws std::invalid_argument unless both numbers are probabilities, neither 0 nor 1.
claim make_claim(double at_least, double confidence);

/// True if the one-sided lower Clopper-Pearson bound of the pass probability reaches the limit.
bool demonstrated(const claim& stated, std::int64_t failures, std::int64_t trials);

/// True if the one-sided upper Clopper-Pearson bound of the pass probability stays below the limit.
bool refuted(const claim& stated, std::int64_t failures, std::int64_t trials);

bool claim_demonstrated(std::int64_t failures, std::int64_t trials, double at_least, double confidence);
bool claim_refuted(std::int64_t failures, std::int64_t trials, double at_least, double confidence);

/// Most further trials that are ever proposed.
inline constexpr std::int64_t most_further_trials = 1'000'000'000'000;

/// Smallest number of further trials that would decide the claim if failures went on at the observed rate; the expected
/// number of further failures is rounded up where the claim would be shown and down where it would be refuted.
/// 0 if the claim is decided already; none if the observed rate equals the limit or the number exceeds 10^12.
/// This is a projection from an estimated rate, not a promise: chance decides about evenly whether it is enough.
/// The smallest number while at most 1000 further failures are needed; beyond that found by bisection, which rounding
/// to whole failures can make settle on a number that also decides but is a few per cent larger.
std::optional<std::int64_t> further_trials(std::int64_t failures, std::int64_t trials, double at_least,
                                           double confidence);

} // namespace windage::evidence
