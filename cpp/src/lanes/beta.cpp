// Incomplete beta function and inverse; see the header for sources and guarantees.
#include <windage/lanes/beta.hpp>

#include <windage/lanes/exponential.hpp>
#include <windage/lanes/pack.hpp>

namespace windage {

namespace {

constexpr double half_ln_2_pi = 0x1.d67f1c864beb5p-1;
constexpr double inverse_root_2_pi = 0x1.9884533d43651p-2;
constexpr double stirling_from = 12.0;
constexpr int largest_fraction = 20000; ///< about 10 sqrt(max(a, b)) terms are needed
constexpr int largest_search = 200;
constexpr double smallest_solution = 1e-300;

double root(double x) { return square_root(pack<1>(x))[0]; }

/// What Stirling's formula (z - 1/2) ln z - z + ln(2 pi)/2 lacks to ln Gamma(z); z >= 12, error below 1e-17.
double stirling_rest_large(double z) {
    // B_2k / (2k (2k - 1)), Abramowitz and Stegun 6.1.41
    constexpr double coefficient[] = {1.0 / 12,   -1.0 / 360,      1.0 / 1260, -1.0 / 1680,
                                      1.0 / 1188, -691.0 / 360360, 1.0 / 156,  -3617.0 / 122400};
    const double w = 1.0 / (z * z);
    double sum = 0.0;
    for (int k = 7; k >= 0; --k) sum = sum * w + coefficient[k];
    return sum / z;
}

/// The same for every z > 0, by Gamma(z) = Gamma(z + n) / (z (z + 1) ... (z + n - 1)).
double stirling_rest(double z) {
    if (z >= stirling_from) return stirling_rest_large(z);
    double product = 1.0, shifted = z;
    while (shifted < stirling_from) {
        product = product * shifted;
        shifted = shifted + 1.0;
    }
    const double large = (shifted - 0.5) * logarithm(shifted) - shifted + stirling_rest_large(shifted);
    return (large - logarithm(product)) - ((z - 0.5) * logarithm(z) - z);
}

/// ln(ratio) where ratio - 1 = difference is known without cancellation.
double logarithm_of_ratio(double ratio, double difference) {
    return ratio > 0.5 && ratio < 2.0 ? logarithm_one_plus(difference) : logarithm(ratio);
}

/// x^a y^b / B(a, b) with y = 1 - x. The large terms of the three Gamma functions are united before rounding:
/// a ln(x (a + b) / a) + b ln(y (a + b) / b) is small near the mode, however large a and b are.
double beta_front(double a, double b, double x, double y) {
    const double sum = a + b, distance = x * b - y * a; // x (a + b) - a
    const double exponent = a * logarithm_of_ratio(x * (sum / a), distance / a) +
                            b * logarithm_of_ratio(y * (sum / b), -distance / b) +
                            (stirling_rest(sum) - stirling_rest(a) - stirling_rest(b));
    return exponential(exponent) * inverse_root_2_pi * root(a) * root(b / sum);
}

double away_from_zero(double x) { return (x < 0.0 ? -x : x) < 1e-290 ? 1e-290 : x; }

/// The continued fraction of I_x(a, b) without its front factor; converges fast for x < (a + 1) / (a + b + 2).
double beta_fraction(double a, double b, double x) {
    double c = 1.0, d = 1.0 / away_from_zero(1.0 - (a + b) * x / (a + 1.0)), value = d;
    for (int m = 1; m <= largest_fraction; ++m) {
        const double even = m * (b - m) * x / ((a + 2.0 * m - 1.0) * (a + 2.0 * m));
        d = 1.0 / away_from_zero(1.0 + even * d);
        c = away_from_zero(1.0 + even / c);
        value = value * (d * c);
        const double odd = -(a + m) * (a + b + m) * x / ((a + 2.0 * m) * (a + 2.0 * m + 1.0));
        d = 1.0 / away_from_zero(1.0 + odd * d);
        c = away_from_zero(1.0 + odd / c);
        const double factor = d * c;
        value = value * factor;
        if (factor - 1.0 < 0x1p-52 && factor - 1.0 > -0x1p-52) break;
    }
    return value;
}

struct beta_tails {
    double lower, upper, front;
};

/// Both tails; the smaller one has full relative accuracy.
beta_tails both_tails(double a, double b, double x, double y) {
    const double front = beta_front(a, b, x, y);
    if (x * (a + b + 2.0) < a + 1.0) {
        const double lower = front * beta_fraction(a, b, x) / a;
        return {lower, 1.0 - lower, front};
    }
    const double upper = front * beta_fraction(b, a, y) / b;
    return {1.0 - upper, upper, front};
}

/// Finds v in (0, 1/2] such that a tail has the wanted size, where v = x or, if `mirrored`, v = 1 - x.
/// In the logarithms of v and of the tail the curve is nearly straight, so that Newton needs few steps.
double search_small_side(double a, double b, double wanted, bool lower_tail, bool mirrored) {
    double low = smallest_solution, high = 0.5, v = 0.25;
    const double wanted_logarithm = logarithm(wanted);
    for (int step = 0; step < largest_search; ++step) {
        const double x = mirrored ? 1.0 - v : v, y = mirrored ? v : 1.0 - v;
        const beta_tails tails = both_tails(a, b, x, y);
        const double tail = lower_tail ? tails.lower : tails.upper;
        const double direction = lower_tail != mirrored ? 1.0 : -1.0; // does the tail grow with v?
        const double miss = logarithm(tail) - wanted_logarithm;
        (miss * direction > 0.0 ? high : low) = v;
        const double slope = direction * tails.front / (tail * (1.0 - v)); // d ln tail / d ln v
        double next = v * exponential(-miss / slope);
        if (!(next > low && next < high)) next = root(low * high);
        const double change = next - v;
        v = next;
        if ((change < 0.0 ? -change : change) <= 0x1p-51 * v) break;
    }
    return v <= 2.0 * smallest_solution ? 0.0 : v;
}

bool is_parameter(double a) { return a > 0.0 && a < detail::infinity; }

} // namespace

double log_gamma(double z) {
    if (!is_parameter(z)) return detail::undefined;
    if (z >= stirling_from) return (z - 0.5) * logarithm(z) - z + half_ln_2_pi + stirling_rest_large(z);
    double product = 1.0, shifted = z;
    for (; shifted < stirling_from; shifted = shifted + 1.0) product = product * shifted;
    return ((shifted - 0.5) * logarithm(shifted) - shifted + half_ln_2_pi + stirling_rest_large(shifted)) -
           logarithm(product);
}

double incomplete_beta(double a, double b, double x) {
    if (!is_parameter(a) || !is_parameter(b) || !(x >= 0.0 && x <= 1.0)) return detail::undefined;
    if (x == 0.0 || x == 1.0) return x;
    return both_tails(a, b, x, 1.0 - x).lower;
}

double incomplete_beta_inverse(double a, double b, double p) {
    if (!is_parameter(a) || !is_parameter(b) || !(p >= 0.0 && p <= 1.0)) return detail::undefined;
    if (p == 0.0 || p == 1.0) return p;
    // The smaller tail is matched, and the smaller of x and 1 - x is the unknown: nothing is lost to cancellation.
    const bool lower_tail = p <= 0.5;
    const beta_tails middle = both_tails(a, b, 0.5, 0.5);
    const bool mirrored = lower_tail ? middle.lower < p : middle.upper > 1.0 - p;
    const double v = search_small_side(a, b, lower_tail ? p : 1.0 - p, lower_tail, mirrored);
    return mirrored ? 1.0 - v : v;
}

} // namespace windage
