#include <windage/evidence/claim.hpp>
#include <windage/evidence/probability.hpp>
#include <windage/evidence/trial_counts.hpp>

#include <cmath>
#include <sstream>
#include <stdexcept>

namespace windage::evidence {

namespace {
/// Smallest integer in (low, high] for which the condition holds, where it holds at high, does not at low, and changes
/// once in between.
template <class Condition> std::int64_t first_that(std::int64_t low, std::int64_t high, Condition holds) {
    while (high - low > 1) {
        const std::int64_t middle = low + (high - low) / 2;
        (holds(middle) ? high : low) = middle;
    }
    return high;
}

std::int64_t demand(std::optional<std::int64_t> trials, const char* field, double value) {
    if (trials) return *trials;
    std::ostringstream text;
    text.precision(17);
    text << field << ": found " << value << "; expected a claim that needs at most 2^53 trials.";
    throw std::invalid_argument(text.str());
}
} // namespace

std::optional<std::int64_t> smallest_trials(std::int64_t failures, double failure_limit, double risk) {
    const auto enough = [&](std::int64_t trials) {
        return within_risk(binomial_at_most(failures, trials, failure_limit), risk);
    };
    // With as many trials as failures the tail is 1, so the answer lies above. The doubling starts near the answer to
    // keep the beta function out of regions where it takes long.
    std::int64_t low = failures;
    double guess = std::fmax(std::ceil((static_cast<double>(failures) + 1.0) / failure_limit),
                             static_cast<double>(failures) + 1.0);
    for (;;) {
        const bool last = guess >= static_cast<double>(largest_count);
        const std::int64_t high = last ? largest_count : static_cast<std::int64_t>(guess);
        if (enough(high)) return first_that(low, high, enough);
        if (last) return std::nullopt;
        low = high;
        guess *= 2.0;
    }
}

std::int64_t trials_to_demonstrate(double probability, double confidence, std::int64_t allowed_failures) {
    check_probability("probability", probability);
    check_probability("confidence", confidence);
    check_count("allowed_failures", allowed_failures, 0, largest_count - 1);
    return demand(smallest_trials(allowed_failures, complement(probability), complement(confidence)),
                  "allowed_failures", static_cast<double>(allowed_failures));
}

std::optional<std::int64_t> allowed_failures(std::int64_t trials, double probability, double confidence) {
    const claim stated{complement(probability), complement(confidence)};
    check_count("trials", trials, 0, largest_count);
    check_probability("probability", probability);
    check_probability("confidence", confidence);
    const auto too_many = [&](std::int64_t failures) { return !demonstrated(stated, failures, trials); };
    if (too_many(0)) return std::nullopt;
    return first_that(0, trials, too_many) - 1;
}

std::int64_t trials_with_at_most(std::int64_t events, double event_probability, double confidence) {
    check_count("events", events, 0, largest_count - 1);
    check_probability("event_probability", event_probability);
    check_probability("confidence", confidence);
    const double risk = complement(confidence);
    const auto too_many = [&](std::int64_t trials) {
        return !within_risk(binomial_at_least(events + 1, trials, event_probability), risk);
    };
    // No more events than trials can occur, so `events` trials are always safe.
    std::int64_t low = events, high = events + 1;
    while (!too_many(high)) {
        if (high == largest_count) demand(std::nullopt, "event_probability", event_probability);
        low = high;
        high = high < largest_count / 2 ? 2 * high : largest_count;
    }
    return first_that(low, high, too_many) - 1;
}

std::int64_t chernoff_trials(double accuracy, double confidence) {
    // Below 1e-7 the count would leave the whole doubles.
    if (!(accuracy >= 1e-7 && accuracy < 1.0)) {
        std::ostringstream text;
        text.precision(17);
        text << "accuracy: found " << accuracy << "; expected a number from 1e-7 up to, but not including, 1.";
        throw std::invalid_argument(text.str());
    }
    check_probability("confidence", confidence);
    return static_cast<std::int64_t>(std::ceil(std::log(2.0 / complement(confidence)) / (2.0 * accuracy * accuracy)));
}

// The largest of N values is exceeded with more than probability e only if all N fell into the other 1 - e, so the
// number is that of a claim proved without any failure. Taken from the exact tail, its rounding is that of all claims.
std::int64_t log_over_log_trials(double exceedance, double confidence) {
    check_probability("exceedance", exceedance);
    check_probability("confidence", confidence);
    return demand(smallest_trials(0, exceedance, complement(confidence)), "exceedance", exceedance);
}

} // namespace windage::evidence
