#include <windage/evidence/binomial_bounds.hpp>
#include <windage/evidence/probability.hpp>

#include <boost/math/policies/error_handling.hpp>
#include <boost/math/special_functions/beta.hpp>
#include <boost/math/special_functions/erf.hpp>
#include <cmath>
#include <numbers>

namespace windage::evidence {

namespace {

struct counts {
    double passes;
    double failures;
};

counts checked(std::int64_t failures, std::int64_t trials, double confidence) {
    check_counts(failures, trials);
    check_probability("confidence", confidence);
    return {static_cast<double>(trials - failures), static_cast<double>(failures)};
}

/// Bisects [0, 1] down to neighbouring doubles for the place where the condition turns true.
template <class Condition> double first_true(Condition holds) {
    double low = 0.0, high = 1.0;
    for (;;) {
        const double middle = low + (high - low) / 2.0;
        if (middle <= low || middle >= high) return high;
        (holds(middle) ? high : low) = middle;
    }
}

// Quantiles of the beta distribution with the risk in the lower or in the upper tail. The first guess of Boost's
// inverse gives up for some counts above 10^10 (Boost 1.85: "series evaluation exceeded"); the tails themselves do not.
double lower_quantile(double a, double b, double risk) {
    try {
        return boost::math::ibeta_inv(a, b, risk);
    } catch (const boost::math::evaluation_error&) {
        return first_true([&](double p) { return boost::math::ibeta(a, b, p) >= risk; });
    }
}

double upper_quantile(double a, double b, double risk) {
    try {
        return boost::math::ibetac_inv(a, b, risk);
    } catch (const boost::math::evaluation_error&) {
        return first_true([&](double p) { return boost::math::ibetac(a, b, p) <= risk; });
    }
}

// Each method is a pair of one-sided bounds at a given risk. The ends are set apart because the inverse incomplete beta
// function is not defined for a zero count.
struct clopper_pearson {
    static double lower(counts n, double risk) {
        return n.passes == 0.0 ? 0.0 : lower_quantile(n.passes, n.failures + 1.0, risk);
    }
    static double upper(counts n, double risk) {
        return n.failures == 0.0 ? 1.0 : upper_quantile(n.passes + 1.0, n.failures, risk);
    }
};

struct jeffreys {
    static double lower(counts n, double risk) {
        return n.passes == 0.0 ? 0.0 : lower_quantile(n.passes + 0.5, n.failures + 0.5, risk);
    }
    static double upper(counts n, double risk) {
        return n.failures == 0.0 ? 1.0 : upper_quantile(n.passes + 0.5, n.failures + 0.5, risk);
    }
};

// The bounds are the roots of (1 + a) p^2 - (2 e + a) p + e^2 = 0 with the estimate e and a = z^2 / trials. The larger
// root has no cancellation; the smaller one follows from the product of the roots, which has none either.
struct wilson {
    static double lower(counts n, double risk) { return root(n, -normal_quantile(risk)); }
    static double upper(counts n, double risk) { return root(n, normal_quantile(risk)); }

private:
    /// Exceeded by a standard normal number with probability `risk`; negative for a risk above one half.
    static double normal_quantile(double risk) { return std::numbers::sqrt2 * boost::math::erfc_inv(2.0 * risk); }

    static double root(counts n, double z) {
        const double trials = n.passes + n.failures;
        if (trials == 0.0) return z < 0.0 ? 0.0 : 1.0;
        const double estimate = n.passes / trials, a = z * z / trials;
        const double sum = 2.0 * estimate + a + std::sqrt(a * (4.0 * estimate * (n.failures / trials) + a));
        const double found = z < 0.0 ? 2.0 * estimate * estimate / sum : sum / (2.0 * (1.0 + a));
        return std::fmin(found, 1.0);
    }
};

template <class Method> double lower_bound(std::int64_t failures, std::int64_t trials, double confidence) {
    return Method::lower(checked(failures, trials, confidence), complement(confidence));
}

template <class Method> double upper_bound(std::int64_t failures, std::int64_t trials, double confidence) {
    return Method::upper(checked(failures, trials, confidence), complement(confidence));
}

template <class Method> interval both_bounds(std::int64_t failures, std::int64_t trials, double confidence) {
    const counts n = checked(failures, trials, confidence);
    const double risk = complement(confidence) / 2.0;
    const double lower = Method::lower(n, risk);
    // At a confidence near 0 the ends differ by less than their rounding.
    return {lower, std::fmax(lower, Method::upper(n, risk))};
}

} // namespace

double clopper_pearson_lower(std::int64_t failures, std::int64_t trials, double confidence) {
    return lower_bound<clopper_pearson>(failures, trials, confidence);
}
double clopper_pearson_upper(std::int64_t failures, std::int64_t trials, double confidence) {
    return upper_bound<clopper_pearson>(failures, trials, confidence);
}
interval clopper_pearson_interval(std::int64_t failures, std::int64_t trials, double confidence) {
    return both_bounds<clopper_pearson>(failures, trials, confidence);
}

double wilson_lower(std::int64_t failures, std::int64_t trials, double confidence) {
    return lower_bound<wilson>(failures, trials, confidence);
}
double wilson_upper(std::int64_t failures, std::int64_t trials, double confidence) {
    return upper_bound<wilson>(failures, trials, confidence);
}
interval wilson_interval(std::int64_t failures, std::int64_t trials, double confidence) {
    return both_bounds<wilson>(failures, trials, confidence);
}

double jeffreys_lower(std::int64_t failures, std::int64_t trials, double confidence) {
    return lower_bound<jeffreys>(failures, trials, confidence);
}
double jeffreys_upper(std::int64_t failures, std::int64_t trials, double confidence) {
    return upper_bound<jeffreys>(failures, trials, confidence);
}
interval jeffreys_interval(std::int64_t failures, std::int64_t trials, double confidence) {
    return both_bounds<jeffreys>(failures, trials, confidence);
}

double zero_failure_upper(std::int64_t trials, double confidence) {
    check_count("trials", trials, 1, largest_count);
    check_probability("confidence", confidence);
    return -std::expm1(std::log(complement(confidence)) / static_cast<double>(trials));
}

} // namespace windage::evidence
