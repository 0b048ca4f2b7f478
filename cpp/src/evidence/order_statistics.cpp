#include <windage/evidence/order_statistics.hpp>
#include <windage/evidence/probability.hpp>
#include <windage/evidence/trial_counts.hpp>

namespace windage::evidence {

// The value at rank n - m lies below the content's quantile only if at most m of the n values reach that quantile, and
// each value reaches it with probability 1 - content or more: the same event as a claim with m failures allowed.
std::optional<tolerance_limit> tolerance_rank(std::int64_t trials, double content, double confidence) {
    check_count("trials", trials, 1, largest_count);
    check_probability("content", content);
    check_probability("confidence", confidence);
    const auto above = allowed_failures(trials, content, confidence);
    if (!above) return std::nullopt;
    return tolerance_limit{trials - *above, binomial_at_least(*above + 1, trials, complement(content))};
}

std::int64_t wilks_one_sided(double content, double confidence, std::int64_t order) {
    check_probability("content", content);
    check_count("order", order, 1, largest_count);
    return trials_to_demonstrate(content, confidence, order - 1);
}

// Leaving out the smallest and the largest of n values drops as much content as leaving out the two largest.
std::int64_t wilks_two_sided(double content, double confidence) {
    check_probability("content", content);
    return trials_to_demonstrate(content, confidence, 1);
}

} // namespace windage::evidence
