// Quantile functions of the spreads, by our own elementary functions, so that a drawn parameter has the same digits on
// every machine.
#include <algorithm>
#include <cmath>
#include <limits>
#include <stdexcept>
#include <string>
#include <utility>

#include <windage/campaign/parameters.hpp>
#include <windage/lanes/beta.hpp>
#include <windage/lanes/elementary.hpp>
#include <windage/lanes/normal.hpp>

namespace windage {
namespace {

// Where the inverse of the beta function is right to 1e-9 of the standard deviation (tested); beyond, the law is a
// normal one or a choice of two values.
constexpr double least_shape = 1e-3, most_shape = 1e9;

double root(double x) { return square_root(pack<1>(x))[0]; }

// Quantile of a standard normal number that is known to lie in [low, high]. A window above the mean is mirrored: near 1
// a probability has no digits left for what lies beyond, near 0 it has all of them.
double truncated_normal_quantile(double low, double high, double p) {
    if (low > 0.0) return -truncated_normal_quantile(-high, -low, 1.0 - p);
    const double below = std::isfinite(low) ? normal_cdf(low) : 0.0;
    const double upto = std::isfinite(high) ? normal_cdf(high) : 1.0;
    return std::clamp(normal_quantile(below + p * (upto - below)), low, high);
}

double normal(const std::vector<double>& n, double p) {
    const double mean = n[0], deviation = n[1], low = n[2], high = n[3];
    if (deviation == 0.0) return mean;
    const double z = truncated_normal_quantile((low - mean) / deviation, (high - mean) / deviation, p);
    return std::clamp(mean + deviation * z, low, high);
}

// Each side is kept on its side of the mode, which rounding could otherwise cross.
double triangular(double low, double mode, double high, double p) {
    const double width = high - low;
    if (width == 0.0) return low;
    const double rising = (mode - low) / width, falling = (high - mode) / width;
    if (p < rising) return std::clamp(low + width * root(p * rising), low, mode);
    return std::clamp(high - width * root((1.0 - p) * falling), mode, high);
}

// The first value whose probabilities, added up so far, exceed p; the last sum is 1.
double choice(const std::vector<double>& n, double p) {
    const auto sums = n.begin() + std::ptrdiff_t(n.size() / 2);
    return n[std::size_t(std::upper_bound(sums, n.end(), p) - sums)];
}

double samples(const std::vector<double>& n, double p) {
    const auto which = std::size_t(p * double(n.size()));
    return n[std::min(which, n.size() - 1)];
}

[[noreturn]] void refuse(const spread_description& s, const std::string& expected) {
    throw std::invalid_argument("spread '" + s.name + "': expected " + expected);
}

// Values in ascending order, those of probability 0 left out, with the sums of the probabilities.
std::vector<double> sorted_choice(const std::vector<double>& n) {
    const std::size_t count = n.size() / 2;
    std::vector<std::pair<double, double>> pairs;
    for (std::size_t i = 0; i < count; ++i)
        if (n[count + i] > 0.0) pairs.emplace_back(n[i] + 0.0, n[count + i]);
    std::sort(pairs.begin(), pairs.end());
    std::vector<double> values, sums;
    double sum = 0.0;
    for (const auto& [value, probability] : pairs) {
        sum += probability;
        values.push_back(value);
        sums.push_back(std::min(sum, 1.0));
    }
    sums.back() = 1.0; // whatever the sum was rounded to
    values.insert(values.end(), sums.begin(), sums.end());
    return values;
}

void check(const spread_description& s) {
    const std::vector<double>& n = s.numbers;
    const bool bounds_may_be_infinite = s.kind == spread_kind::normal && n.size() == 4;
    for (std::size_t i = 0; i < n.size(); ++i)
        if (std::isnan(n[i]) || (std::isinf(n[i]) && !(bounds_may_be_infinite && i >= 2))) refuse(s, "finite numbers");
    const auto count = [&](std::size_t wanted) {
        if (n.size() != wanted) refuse(s, std::to_string(wanted) + " numbers");
    };
    const auto width = [&](double low, double high) {
        if (!std::isfinite(high - low)) refuse(s, "bounds whose distance double precision can hold");
    };
    switch (s.kind) {
    case spread_kind::normal:
        count(4);
        if (n[1] < 0.0) refuse(s, "a standard deviation >= 0");
        if (!(n[2] < n[3]) && n[1] > 0.0) refuse(s, "low < high");
        if (n[1] == 0.0 && !(n[2] <= n[0] && n[0] <= n[3])) refuse(s, "low <= mean <= high");
        if (n[1] > 0.0 && ((n[2] - n[0]) / n[1] > 8.0 || (n[3] - n[0]) / n[1] < -8.0))
            refuse(s, "bounds within eight standard deviations of the mean");
        return;
    case spread_kind::uniform:
        count(2);
        if (!(n[0] <= n[1])) refuse(s, "low <= high");
        width(n[0], n[1]);
        return;
    case spread_kind::triangular:
        count(3);
        if (!(n[0] <= n[1] && n[1] <= n[2])) refuse(s, "low <= mode <= high");
        width(n[0], n[2]);
        return;
    case spread_kind::lognormal:
        count(2);
        if (!(n[0] > 0.0 && n[1] >= 0.0)) refuse(s, "a median > 0 and a deviation >= 0");
        return;
    case spread_kind::beta:
        count(4);
        if (!(least_shape <= n[0] && n[0] <= most_shape && least_shape <= n[1] && n[1] <= most_shape))
            refuse(s, "shapes from 0.001 to 1e9");
        if (!(n[2] <= n[3])) refuse(s, "low <= high");
        width(n[2], n[3]);
        return;
    case spread_kind::choice: {
        if (n.empty() || n.size() % 2 != 0) refuse(s, "as many probabilities as values");
        double sum = 0.0;
        for (std::size_t i = n.size() / 2; i < n.size(); ++i) {
            if (n[i] < 0.0) refuse(s, "probabilities >= 0");
            sum += n[i];
        }
        if (!(sum > 1.0 - 1e-9 && sum < 1.0 + 1e-9)) refuse(s, "probabilities that add up to 1");
        return;
    }
    case spread_kind::samples:
    case spread_kind::rows:
    case spread_kind::drawn_rows:
        if (n.empty()) refuse(s, "at least one value");
        return;
    }
}

} // namespace

double quantile(const spread_description& s, double p, std::uint64_t trial) {
    const std::vector<double>& n = s.numbers;
    switch (s.kind) {
    case spread_kind::normal: return normal(n, p);
    case spread_kind::uniform: return std::clamp(n[0] + p * (n[1] - n[0]), n[0], n[1]);
    case spread_kind::triangular: return triangular(n[0], n[1], n[2], p);
    case spread_kind::lognormal: return n[0] * exponential(pack<1>(n[1] * normal_quantile(p)))[0];
    case spread_kind::beta:
        return std::clamp(n[2] + (n[3] - n[2]) * incomplete_beta_inverse(n[0], n[1], p), n[2], n[3]);
    case spread_kind::choice: return choice(n, p);
    case spread_kind::samples:
    case spread_kind::drawn_rows: return samples(n, p);
    case spread_kind::rows: return n[trial];
    }
    throw std::invalid_argument("spread: unknown kind");
}

spread_description prepared(spread_description s) {
    check(s);
    std::vector<double>& n = s.numbers;
    if (s.kind == spread_kind::choice) n = sorted_choice(n);
    if (s.kind == spread_kind::samples) {
        for (double& value : n) value = value + 0.0; // one zero, else the order of 0 and -0 would be that of writing
        std::sort(n.begin(), n.end());
    }
    const double least = quantile(s, 0x1p-53, 0), most = quantile(s, 1.0 - 0x1p-53, 0);
    const bool is_normal = s.kind != spread_kind::lognormal || least >= std::numeric_limits<double>::min();
    if (!std::isfinite(least) || !std::isfinite(most) || !is_normal)
        refuse(s, "numbers all of whose draws double precision can hold");
    return s;
}

} // namespace windage
