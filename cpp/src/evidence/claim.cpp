#include <windage/evidence/claim.hpp>
#include <windage/evidence/probability.hpp>
#include <windage/evidence/trial_counts.hpp>

#include <algorithm>
#include <cmath>

namespace windage::evidence {

claim make_claim(double at_least, double confidence) {
    check_probability("at_least", at_least);
    check_probability("confidence", confidence);
    return {complement(at_least), complement(confidence)};
}

bool demonstrated(const claim& stated, std::int64_t failures, std::int64_t trials) {
    return within_risk(binomial_at_most(failures, trials, stated.failure_limit), stated.risk);
}

// A bound equal to the limit does not refute, so ties stay undecided here.
bool refuted(const claim& stated, std::int64_t failures, std::int64_t trials) {
    return binomial_at_least(failures, trials, stated.failure_limit) < stated.risk * (1.0 - tie_tolerance);
}

bool claim_demonstrated(std::int64_t failures, std::int64_t trials, double at_least, double confidence) {
    const claim stated = make_claim(at_least, confidence);
    check_counts(failures, trials);
    return demonstrated(stated, failures, trials);
}

bool claim_refuted(std::int64_t failures, std::int64_t trials, double at_least, double confidence) {
    const claim stated = make_claim(at_least, confidence);
    check_counts(failures, trials);
    return refuted(stated, failures, trials);
}

namespace {

// Products of two counts reach 10^12 * 2^53.
__extension__ typedef __int128 wide_count;

/// What was observed; failures > 0.
struct observed {
    std::int64_t failures;
    std::int64_t trials;

    /// Most further trials in which this many failures are expected, or fewer.
    std::int64_t trials_at_most(std::int64_t further_failures) const {
        return static_cast<std::int64_t>(wide_count(further_failures) * trials / failures);
    }
    /// Fewest further trials in which this many failures are expected, or more.
    std::int64_t trials_at_least(std::int64_t further_failures) const {
        return static_cast<std::int64_t>((wide_count(further_failures) * trials + failures - 1) / failures);
    }
};

/// Smallest number of further failures, 1 to most, at which `decided` is true. Near its first true value `decided`
/// flickers with the rounding to whole trials, so small numbers are tried one by one; the others are bisected.
template <class Decided> std::optional<std::int64_t> first_decided(std::int64_t most, Decided decided) {
    if (most < 1) return std::nullopt;
    std::int64_t low = 0, high = 1;
    while (!decided(high)) {
        if (high == most) return std::nullopt;
        low = high;
        high = std::min(2 * high, most);
    }
    constexpr std::int64_t one_by_one = 2048;
    if (high <= one_by_one) {
        std::int64_t n = 1;
        while (!decided(n)) ++n;
        return n;
    }
    while (high - low > 1) {
        const std::int64_t middle = low + (high - low) / 2;
        (decided(middle) ? high : low) = middle;
    }
    return high;
}

std::optional<std::int64_t> until_demonstrated(const claim& stated, observed seen, std::int64_t most_failures) {
    const auto enough = [&](std::int64_t n) {
        return demonstrated(stated, seen.failures + n, seen.trials + seen.trials_at_most(n));
    };
    const auto n = first_decided(most_failures, enough);
    if (!n) return std::nullopt;
    // One failure fewer was not enough in the most trials that expect no more, so the number below exceeds these: n
    // failures, rounded up, are what it expects.
    const auto needed = smallest_trials(seen.failures + *n, stated.failure_limit, stated.risk);
    if (!needed) return std::nullopt;
    return *needed - seen.trials;
}

std::optional<std::int64_t> until_refuted(const claim& stated, observed seen, std::int64_t most_failures) {
    const auto enough = [&](std::int64_t n) {
        return refuted(stated, seen.failures + n, seen.trials + seen.trials_at_least(n));
    };
    const auto n = first_decided(most_failures, enough);
    if (!n) return std::nullopt;
    return seen.trials_at_least(*n);
}

} // namespace

std::optional<std::int64_t> further_trials(std::int64_t failures, std::int64_t trials, double at_least,
                                           double confidence) {
    const claim stated = make_claim(at_least, confidence);
    check_counts(failures, trials);
    if (demonstrated(stated, failures, trials) || refuted(stated, failures, trials)) return 0;

    std::optional<std::int64_t> found;
    if (failures == 0) {
        const auto needed = smallest_trials(0, stated.failure_limit, stated.risk);
        if (needed) found = *needed - trials;
    } else {
        const observed seen{failures, trials};
        const double at_limit = static_cast<double>(trials) * stated.failure_limit;
        const double excess = static_cast<double>(failures) - at_limit;
        if (std::abs(excess) <= tie_tolerance * at_limit) return std::nullopt;
        const auto most_failures = static_cast<std::int64_t>(wide_count(most_further_trials) * failures / trials);
        found =
            excess < 0.0 ? until_demonstrated(stated, seen, most_failures) : until_refuted(stated, seen, most_failures);
    }
    if (found && *found > most_further_trials) return std::nullopt;
    return found;
}

} // namespace windage::evidence
