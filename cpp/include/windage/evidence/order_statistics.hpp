// Distribution-free tolerance bounds: which of the sorted values is not exceeded by a given fraction of all trials.
//
// Guarantee: for independent trials of any distribution, ties and infinite values included, the value at the returned
// rank is an upper bound for at least the stated content with at least the stated confidence; the confidence attained
// is returned because ranks are whole numbers. Nothing is fitted and nothing extrapolated.
#pragma once

#include <cstdint>
#include <optional>

namespace windage::evidence {

struct tolerance_limit {
    std::int64_t rank;          ///< 1 is the smallest value, `trials` the largest
    double attained_confidence; ///< at least the confidence asked for (up to the tie tolerance)
};

/// Lowest rank whose value bounds the stated content from above; none if even the largest value does not.
/// Wilks 1941, "Determination of sample sizes for setting tolerance limits", Ann. Math. Stat. 12:91-96.
std::optional<tolerance_limit> tolerance_rank(std::int64_t trials, double content, double confidence);

/// Smallest number of trials whose `order`-th largest value is an upper tolerance bound (Wilks 1941); order 1 is the
/// largest value.
std::int64_t wilks_one_sided(double content, double confidence, std::int64_t order);

/// Smallest number of trials whose smallest and largest value enclose the content: 1 - g^n - n (1 - g) g^(n-1) at least
/// the confidence (Wilks 1941).
std::int64_t wilks_two_sided(double content, double confidence);

} // namespace windage::evidence
