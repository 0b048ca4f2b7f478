#include <windage/evidence/probability.hpp>

#include <boost/math/special_functions/beta.hpp>
#include <cmath>
#include <sstream>
#include <stdexcept>

namespace windage::evidence {

namespace {
template <class Value> [[noreturn]] void refuse(const char* field, Value found, const char* expected) {
    std::ostringstream text;
    text.precision(17);
    text << field << ": found " << found << "; expected " << expected << '.';
    throw std::invalid_argument(text.str());
}
} // namespace

double complement(double probability) {
    // Worked example: 0.99999999 gives digits = 99999999 at scale 1e8, and 1 / 1e8 is the double nearest to 1e-8,
    // while 1 - 0.99999999 is 1.00000000502e-08. Both divisions are of whole doubles, hence correctly rounded.
    double scale = 1.0;
    for (int decimals = 1; decimals <= 15; ++decimals) {
        scale *= 10.0;
        const double digits = std::round(probability * scale);
        if (digits / scale == probability) return (scale - digits) / scale;
    }
    return 1.0 - probability;
}

void check_probability(const char* field, double value) {
    // The comparison also refuses NaN. Certainty (0 or 1) can be claimed by no number of trials.
    if (!(value >= smallest_probability && value <= 1.0 - smallest_probability))
        refuse(field, value, "a number above 0 and below 1, not nearer than 1e-15 to either");
}

void check_count(const char* field, std::int64_t value, std::int64_t least, std::int64_t most) {
    if (value >= least && value <= most) return;
    std::ostringstream expected;
    expected << "a whole number from " << least << " to " << most;
    refuse(field, value, expected.str().c_str());
}

void check_counts(std::int64_t failures, std::int64_t trials) {
    check_count("trials", trials, 0, largest_count);
    check_count("failures", failures, 0, trials);
}

// Both tails by the incomplete beta function (Abramowitz & Stegun 1964, 26.5.24), each computed directly: one minus the
// other tail would lose the digits of a small one.
double binomial_at_most(std::int64_t events, std::int64_t trials, double probability) {
    if (events < 0) return 0.0;
    if (events >= trials) return 1.0;
    return boost::math::ibetac(static_cast<double>(events) + 1.0, static_cast<double>(trials - events), probability);
}

double binomial_at_least(std::int64_t events, std::int64_t trials, double probability) {
    if (events <= 0) return 1.0;
    if (events > trials) return 0.0;
    return boost::math::ibeta(static_cast<double>(events), static_cast<double>(trials - events) + 1.0, probability);
}

} // namespace windage::evidence
