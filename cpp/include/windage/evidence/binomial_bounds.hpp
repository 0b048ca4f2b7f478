// Bounds of the pass probability from the failures among independent trials.
//
// Clopper-Pearson carries every verdict: whatever the true pass probability, the stated bound is wrong with at most the
// stated risk (guaranteed coverage, 1934). Wilson and Jeffreys cover on average only; they are for display.
// All bounds are of the PASS probability. For those of the failure probability hand in trials - failures as the
// failures: lower and upper keep their names, and a small failure probability keeps all its digits.
#pragma once

#include <cstdint>

namespace windage::evidence {

/// Lower and upper bound of a probability.
struct interval {
    double lower;
    double upper;
};

// One-sided bounds, each with the whole risk 1 - confidence on its side. With 0 trials: 0 and 1.
// Throw std::invalid_argument unless 0 <= failures <= trials <= 2^53 and 0 < confidence < 1.

/// Clopper & Pearson 1934, "The use of confidence or fiducial limits illustrated in the case of the binomial",
/// Biometrika 26:404-413. Inverse of the exact binomial tail.
double clopper_pearson_lower(std::int64_t failures, std::int64_t trials, double confidence);
double clopper_pearson_upper(std::int64_t failures, std::int64_t trials, double confidence);

/// Wilson 1927, "Probable inference, the law of succession, and statistical inference", J. Am. Stat. Assoc. 22:209-212.
double wilson_lower(std::int64_t failures, std::int64_t trials, double confidence);
double wilson_upper(std::int64_t failures, std::int64_t trials, double confidence);

/// Quantiles of the posterior under the prior Beta(1/2, 1/2), ends 0 and 1 where no pass or no failure was seen:
/// Brown, Cai & DasGupta 2001, "Interval estimation for a binomial proportion", Stat. Sci. 16:101-133.
double jeffreys_lower(std::int64_t failures, std::int64_t trials, double confidence);
double jeffreys_upper(std::int64_t failures, std::int64_t trials, double confidence);

// Two-sided intervals: half of the risk on each side.
interval clopper_pearson_interval(std::int64_t failures, std::int64_t trials, double confidence);
interval wilson_interval(std::int64_t failures, std::int64_t trials, double confidence);
interval jeffreys_interval(std::int64_t failures, std::int64_t trials, double confidence);

/// Upper bound of the failure probability when none of the trials failed: 1 - risk^(1/trials). Throws for 0 trials.
double zero_failure_upper(std::int64_t trials, double confidence);

} // namespace windage::evidence
