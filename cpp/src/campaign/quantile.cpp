// Quantile functions of the spreads, by our own elementary functions, so that a drawn parameter has the same digits on
// every machine.
#include <algorithm>
#include <cmath>
#include <stdexcept>
#include <string>

#include <windage/campaign/parameters.hpp>
#include <windage/lanes/beta.hpp>
#include <windage/lanes/elementary.hpp>
#include <windage/lanes/normal.hpp>

namespace windage {
namespace {

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

double triangular(double low, double mode, double high, double p) {
    const double width = high - low;
    if (width == 0.0) return low;
    const double rising = (mode - low) / width;
    return p < rising ? low + root(p * width * (mode - low)) : high - root((1.0 - p) * width * (high - mode));
}

double choice(const std::vector<double>& n, double p) {
    const std::size_t count = n.size() / 2;
    double upto = 0.0;
    for (std::size_t i = 0; i + 1 < count; ++i) {
        upto += n[count + i];
        if (p < upto) return n[i];
    }
    return n[count - 1];
}

double samples(const std::vector<double>& n, double p) {
    const auto which = std::size_t(p * double(n.size()));
    return n[std::min(which, n.size() - 1)];
}

[[noreturn]] void refuse(const spread_description& s, const std::string& expected) {
    throw std::invalid_argument("spread '" + s.name + "': expected " + expected);
}

} // namespace

double quantile(const spread_description& s, double p, std::uint64_t trial) {
    const std::vector<double>& n = s.numbers;
    switch (s.kind) {
    case spread_kind::normal: return normal(n, p);
    case spread_kind::uniform: return n[0] + p * (n[1] - n[0]);
    case spread_kind::triangular: return triangular(n[0], n[1], n[2], p);
    case spread_kind::lognormal: return n[0] * exponential(pack<1>(n[1] * normal_quantile(p)))[0];
    case spread_kind::beta: return n[2] + (n[3] - n[2]) * incomplete_beta_inverse(n[0], n[1], p);
    case spread_kind::choice: return choice(n, p);
    case spread_kind::samples: return samples(n, p);
    case spread_kind::rows: return n[trial];
    }
    throw std::invalid_argument("spread: unknown kind");
}

void check(const spread_description& s) {
    const std::vector<double>& n = s.numbers;
    const bool bounds_may_be_infinite = s.kind == spread_kind::normal && n.size() == 4;
    for (std::size_t i = 0; i < n.size(); ++i)
        if (std::isnan(n[i]) || (std::isinf(n[i]) && !(bounds_may_be_infinite && i >= 2))) refuse(s, "finite numbers");
    const auto count = [&](std::size_t wanted) {
        if (n.size() != wanted) refuse(s, std::to_string(wanted) + " numbers");
    };
    switch (s.kind) {
    case spread_kind::normal:
        count(4);
        if (n[1] < 0.0) refuse(s, "a standard deviation >= 0");
        if (!(n[2] < n[3]) && n[1] > 0.0) refuse(s, "low < high");
        if (n[1] > 0.0 && ((n[2] - n[0]) / n[1] > 8.0 || (n[3] - n[0]) / n[1] < -8.0))
            refuse(s, "bounds within eight standard deviations of the mean");
        return;
    case spread_kind::uniform:
        count(2);
        if (!(n[0] <= n[1])) refuse(s, "low <= high");
        return;
    case spread_kind::triangular:
        count(3);
        if (!(n[0] <= n[1] && n[1] <= n[2])) refuse(s, "low <= mode <= high");
        return;
    case spread_kind::lognormal:
        count(2);
        if (!(n[0] > 0.0 && n[1] >= 0.0)) refuse(s, "a median > 0 and a deviation >= 0");
        return;
    case spread_kind::beta:
        count(4);
        if (!(n[0] > 0.0 && n[1] > 0.0 && n[2] <= n[3])) refuse(s, "a > 0, b > 0 and low <= high");
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
        if (n.empty()) refuse(s, "at least one value");
        return;
    }
}

} // namespace windage
