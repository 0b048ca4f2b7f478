#include <windage/plant/roundoff.hpp>

#include <algorithm>
#include <array>

namespace windage {
namespace {

constexpr std::size_t points = 15; // samples 1, 2, 4, ... 2^14
constexpr double rounding = 0x1p-53, largest = 0x1p200;

lane_matrix product(const lane_matrix& a, const lane_matrix& b) {
    lane_matrix c(a.rows(), b.columns());
    for (int i = 0; i < a.rows(); ++i)
        for (int k = 0; k < a.columns(); ++k)
            for (int j = 0; j < b.columns(); ++j) c(i, j) += a(i, k) * b(k, j);
    return c;
}

mask<lanes> fits(const lane_matrix& m) {
    wide sum = 0.0;
    for (int i = 0; i < m.rows(); ++i)
        for (int j = 0; j < m.columns(); ++j) sum += absolute(m(i, j));
    return sum < largest;
}

/// The response to one input at samples 2^0, 2^1, ..., one recurrence a lane; zeros from where it no longer fits into
/// the numbers.
struct response {
    std::array<lane_matrix, points + 1> weight; // of a rounding of each state, 0 samples and 2^(k-1) samples later
    std::array<lane_matrix, points> rounded;    // how much of each state is rounded at sample 2^k
    std::array<wide, points> relative;          // the inverse square of the largest output until sample 2^k

    response(const lane_matrix& phi, const lane_matrix& gamma, const lane_matrix& c) {
        const int n = phi.rows();
        lane_matrix power = phi, x = gamma;
        wide most = 0.0;
        auto goes_on = fits(power) & fits(x);
        weight[0] = c;
        for (std::size_t k = 0; k < points; ++k) {
            weight[k + 1] = product(c, power);
            rounded[k] = lane_matrix(n, 1);
            for (int i = 0; i < n; ++i) {
                wide sum = absolute(gamma(i, 0));
                for (int s = 0; s < n; ++s) sum += absolute(phi(i, s)) * absolute(x(s, 0));
                rounded[k](i, 0) = select(goes_on, sum, 0.0);
                weight[k + 1](0, i) = select(goes_on, weight[k + 1](0, i), 0.0);
            }
            most = maximum(most, select(goes_on, absolute(product(c, x)(0, 0)), 0.0));
            relative[k] = select(goes_on & (most > 0.0), 1.0 / (most * most), 0.0);
            const lane_matrix moved = product(power, x);
            for (int i = 0; i < n; ++i) x(i, 0) += moved(i, 0);
            power = product(power, power);
            goes_on = goes_on & fits(power) & fits(x);
        }
    }

    // So many samples round alike as the shorter one of both times has, and their roundings meet at about the longer.
    // They add up, since a coefficient is rounded once for all samples: a lightly damped mode repeats what that does.
    wide largest_square() const {
        wide worst = 0.0;
        for (std::size_t later = 0; later < points; ++later)
            for (std::size_t at = 0; at + 1 < points; ++at) {
                wide square = 0.0;
                for (int i = 0; i < rounded[at].rows(); ++i) {
                    const wide part = weight[later](0, i) * rounded[at](i, 0);
                    square += part * part;
                }
                const double samples = double(std::size_t(1) << std::min(later > 0 ? later - 1 : 0, at));
                worst = maximum(worst, square * (samples * samples * relative[std::max(later, at + 1)]));
            }
        return worst;
    }
};

lane_matrix column(const lane_matrix& m, int which) {
    lane_matrix one(m.rows(), 1);
    for (int i = 0; i < m.rows(); ++i) one(i, 0) = m(i, which);
    return one;
}

// The load of a transfer function adds to its input: the same column twice.
bool is_like_the_first(const lane_matrix& m, int which) {
    for (int i = 0; i < m.rows(); ++i)
        if (!all(m(i, which) == m(i, 0))) return false;
    return which > 0;
}

} // namespace

wide relative_roundoff(const lane_matrix& phi, const lane_matrix& gamma, const lane_matrix& c) {
    wide worst = 0.0;
    for (int j = 0; j < gamma.columns(); ++j)
        if (!is_like_the_first(gamma, j)) worst = maximum(worst, response(phi, column(gamma, j), c).largest_square());
    return rounding * square_root(worst);
}

} // namespace windage
