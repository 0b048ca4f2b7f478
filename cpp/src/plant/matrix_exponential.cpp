#include <windage/plant/matrix_exponential.hpp>

#include <utility>

namespace windage {
namespace {

constexpr int degree = 16;         // remainder below 2^-53 for a norm of 1/2
constexpr int most_squarings = 60; // beyond, the result is not finite in any case

// Halvings that bring the largest row sum of each lane to 1/2 or below, and that power of two.
struct scaling {
    wide count = 0.0, factor = 1.0;
    int most = 0;

    explicit scaling(const lane_matrix& rows) {
        wide norm = 0.0;
        for (int i = 0; i < rows.rows(); ++i) {
            wide sum = 0.0;
            for (int j = 0; j < rows.columns(); ++j) sum += absolute(rows(i, j));
            norm = maximum(norm, sum);
        }
        for (auto large = norm > 0.5; any(large) && most < most_squarings; large = norm > 0.5) {
            factor = select(large, 0.5 * factor, factor);
            count = select(large, count + 1.0, count);
            norm = 0.5 * norm;
            ++most;
        }
    }
};

// An entry of the upper rows of a product; the lower rows of `b` are those of the unit matrix.
WINDAGE_INLINE wide product_entry(const lane_matrix& a, const lane_matrix& b, int i, int j) {
    const int n = a.rows();
    wide sum = a(i, 0) * b(0, j);
    for (int k = 1; k < n; ++k) sum += a(i, k) * b(k, j);
    return j >= n ? sum + a(i, j) : sum;
}

} // namespace

lane_matrix transition(const linear_model& m, wide h) {
    const int n = m.a.rows(), w = m.e.columns(), columns = n + 1 + w;
    lane_matrix rows(n, columns);
    for (int i = 0; i < n; ++i)
        for (int j = 0; j < columns; ++j) rows(i, j) = (j < n ? m.a(i, j) : j == n ? m.b(i, 0) : m.e(i, j - n - 1)) * h;
    const scaling scale(rows);
    lane_matrix first(n, columns), second(n, columns);
    lane_matrix *sum = &first, *next = &second; // exchanged after every product
    for (int i = 0; i < n; ++i) {
        for (int j = 0; j < columns; ++j) rows(i, j) *= scale.factor;
        (*sum)(i, i) = 1.0;
    }
    for (int k = degree; k >= 1; --k) {
        for (int i = 0; i < n; ++i)
            for (int j = 0; j < columns; ++j)
                (*next)(i, j) = wide(i == j ? 1.0 : 0.0) + (1.0 / k) * product_entry(rows, *sum, i, j);
        std::swap(sum, next);
    }
    for (int k = 0; k < scale.most; ++k) {
        const auto wanted = wide(double(k)) < scale.count;
        for (int i = 0; i < n; ++i)
            for (int j = 0; j < columns; ++j)
                (*next)(i, j) = select(wanted, product_entry(*sum, *sum, i, j), (*sum)(i, j));
        std::swap(sum, next);
    }
    return *sum;
}

} // namespace windage
