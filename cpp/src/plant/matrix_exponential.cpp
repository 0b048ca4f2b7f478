#include <windage/plant/matrix_exponential.hpp>

#include <algorithm>
#include <array>
#include <utility>

#include <windage/lanes/double_double.hpp>
#include <windage/plant/balancing.hpp>

namespace windage {
namespace {

constexpr double largest_norm = 0.5; // of what the series is summed for
constexpr double few_squarings = 2;  // up to here the digits of a pack are enough
constexpr int most_squarings = 1000;
constexpr double nothing = 0x1p-900;
constexpr double pair_rounding = 0x1p-104, small_error = 0x1p-60;

/// Terms of the series whose remainder is below the rounding of a number.
template <class Number> constexpr int degree = 16;
template <> constexpr int degree<wide_pair> = 28;

/// The blocks of [A G; 0 S] or of its exponential. S is empty where it is zero, and its exponential the unit matrix.
template <class Number> struct blocks {
    matrix_of<Number> a, g, s;

    std::array<matrix_of<Number>*, 3> all() { return {&a, &g, &s}; }
};

// Calls f(k, i, j) for each entry (i, j) of each block k.
template <class Number, class F> void for_each_entry(const blocks<Number>& x, F&& f) {
    const matrix_of<Number>* const all[3] = {&x.a, &x.g, &x.s};
    for (std::size_t k = 0; k < 3; ++k)
        for (int i = 0; i < all[k]->rows(); ++i)
            for (int j = 0; j < all[k]->columns(); ++j) f(k, i, j);
}

// The largest row sum of each lane; not finite where an entry is not.
template <class Number> wide norm_of(const matrix_of<Number>& m) {
    wide norm = 0.0, total = 0.0;
    for (int i = 0; i < m.rows(); ++i) {
        wide sum = 0.0;
        for (int j = 0; j < m.columns(); ++j) sum += absolute(rounded(m(i, j)));
        norm = maximum(norm, sum);
        total += sum;
    }
    return select(is_finite(total), norm, total);
}

/// Halvings that bring a norm to 1/2 or below, and that power of two.
struct scaling {
    wide count = 0.0, factor = 1.0;
    int most = 0;

    explicit scaling(wide norm) {
        for (auto large = norm > largest_norm; any(large) && most<most_squarings; large = norm> largest_norm) {
            halve(large);
            norm = select(large, 0.5 * norm, norm);
        }
    }
    void halve(mask<lanes> where) {
        factor = select(where, 0.5 * factor, factor);
        count = select(where, count + 1.0, count);
        ++most;
    }
};

template <class Number>
WINDAGE_INLINE Number product_entry(const matrix_of<Number>& a, const matrix_of<Number>& b, int i, int j) {
    Number sum = a(i, 0) * b(0, j);
    for (int k = 1; k < a.columns(); ++k) sum = sum + a(i, k) * b(k, j);
    return sum;
}

// Entry (i, j) of block k of a product.
template <class Number>
WINDAGE_INLINE Number product_entry(const blocks<Number>& x, const blocks<Number>& y, std::size_t k, int i, int j) {
    if (k == 0) return product_entry(x.a, y.a, i, j);
    if (k == 2) return product_entry(x.s, y.s, i, j);
    const Number first = product_entry(x.a, y.g, i, j);
    return first + (y.s.rows() > 0 ? product_entry(x.g, y.s, i, j) : x.g(i, j));
}

/// The columns of each row of a matrix that are not zero in every lane: companion forms are nearly empty.
class filled_entries {
public:
    template <class Number> explicit filled_entries(const matrix_of<Number>& m) {
        ends_.push_back(0);
        for (int i = 0; i < m.rows(); ++i) {
            for (int j = 0; j < m.columns(); ++j)
                if (any(!(rounded(m(i, j)) == 0.0))) columns_.push_back(j);
            ends_.push_back(int(columns_.size()));
        }
    }
    template <class Number>
    WINDAGE_INLINE Number product_entry(const matrix_of<Number>& a, const matrix_of<Number>& b, int i, int j) const {
        Number sum = 0.0;
        for (int k = ends_[std::size_t(i)]; k < ends_[std::size_t(i) + 1]; ++k) {
            const int column = columns_[std::size_t(k)];
            sum = sum + a(i, column) * b(column, j);
        }
        return sum;
    }

private:
    boost::container::small_vector<int, 32> ends_, columns_;
};

template <class Number> blocks<Number> exponential_series(blocks<Number> x, wide h) {
    const filled_entries a(x.a), g(x.g), s(x.s);
    blocks<Number> sum = x, next = x;
    const auto unit = [](std::size_t k, int i, int j) { return Number(k != 1 && i == j ? 1.0 : 0.0); };
    for_each_entry(x, [&](std::size_t k, int i, int j) {
        Number& entry = (*x.all()[k])(i, j);
        entry = entry * Number(h);
        (*sum.all()[k])(i, j) = unit(k, i, j);
    });
    for (int term = degree<Number>; term >= 1; --term) {
        const Number share = Number(1.0) / Number(double(term));
        for_each_entry(x, [&](std::size_t k, int i, int j) {
            Number product = 0.0;
            if (k == 0) product = a.product_entry(x.a, sum.a, i, j);
            if (k == 1)
                product = a.product_entry(x.a, sum.g, i, j) +
                          (x.s.rows() > 0 ? g.product_entry(x.g, sum.s, i, j) : x.g(i, j));
            if (k == 2) product = s.product_entry(x.s, sum.s, i, j);
            (*next.all()[k])(i, j) = unit(k, i, j) + share * product;
        });
        std::swap(sum, next);
    }
    return sum;
}

/// An exponential, and a bound of the rounding in its block A in units of a number's last digit.
template <class Number> struct exponential_of {
    blocks<Number> value;
    wide roundings = 4.0;

    exponential_of(const blocks<Number>& x, wide h, const scaling& scale)
        : value(exponential_series(x, h * scale.factor)) {
        blocks<Number> next = value;
        for (int k = 0; k < scale.most; ++k) {
            const auto wanted = wide(double(k)) < scale.count;
            const wide norm = norm_of(value.a), grown = norm * (2.0 * roundings + double(x.a.rows()) * norm);
            roundings = select(wanted, grown, roundings);
            for_each_entry(value, [&](std::size_t b, int i, int j) {
                const Number square = product_entry(value, value, b, i, j);
                (*next.all()[b])(i, j) = select(wanted, square, (*value.all()[b])(i, j));
            });
            std::swap(value, next);
        }
    }
};

blocks<wide_pair> in_pairs(const blocks<wide>& x) {
    blocks<wide_pair> y{{x.a.rows(), x.a.columns()}, {x.g.rows(), x.g.columns()}, {x.s.rows(), x.s.columns()}};
    const matrix_of<wide>* const all[3] = {&x.a, &x.g, &x.s};
    for_each_entry(x, [&](std::size_t k, int i, int j) { (*y.all()[k])(i, j) = wide_pair((*all[k])(i, j)); });
    return y;
}

// Distance of two matrices, relative to the larger one of them and one.
wide distance(const matrix_of<wide_pair>& x, const matrix_of<wide_pair>& y, wide least) {
    matrix_of<wide> difference(x.rows(), x.columns());
    for (int i = 0; i < x.rows(); ++i)
        for (int j = 0; j < x.columns(); ++j) difference(i, j) = rounded(x(i, j) - y(i, j));
    const wide size = maximum(norm_of(x), least);
    return norm_of(difference) / select(size > 0.0, size, 1.0);
}

/// Where rounding might have grown too much, the lanes of `doubtful`: the difference that another squaring makes.
wide error_of(const blocks<wide_pair>& x, wide h, scaling scale, const exponential_of<wide_pair>& found) {
    const wide bound = found.roundings * pair_rounding;
    const auto doubtful = !(bound < small_error);
    if (!any(doubtful)) return bound;
    scale.halve(doubtful);
    const exponential_of<wide_pair> again(x, h, scale);
    const wide of_phi = distance(found.value.a, again.value.a, 1.0);
    return select(doubtful, maximum(of_phi, distance(found.value.g, again.value.g, 0.0)), bound);
}

} // namespace

step_matrices transition(const lane_matrix& a, const lane_matrix& a_low, const drive& v, wide h) {
    const lane_matrix unit = balanced_units(a);
    blocks<wide> x{a, v.g, v.s};
    for_each_entry(x, [&](std::size_t k, int i, int j) {
        if (k == 0) x.a(i, j) = x.a(i, j) * unit(j, 0) / unit(i, 0);
        if (k == 1) x.g(i, j) = x.g(i, j) / unit(i, 0);
    });
    const scaling scale(absolute(h) * maximum(norm_of(x.a), norm_of(x.s)));
    const auto needs_pairs = scale.count > few_squarings;
    step_matrices step;
    if (!all(needs_pairs)) {
        scaling few = scale;
        few.most = std::min(few.most, int(few_squarings));
        const exponential_of<wide> found(x, h, few);
        step = {found.value.a, found.value.g};
    } else {
        step = {lane_matrix(a.rows(), a.columns()), lane_matrix(v.g.rows(), v.g.columns())};
    }
    if (any(needs_pairs)) {
        blocks<wide_pair> pairs = in_pairs(x);
        for (int i = 0; i < a_low.rows(); ++i)
            for (int j = 0; j < a_low.columns(); ++j) pairs.a(i, j).low = a_low(i, j) * unit(j, 0) / unit(i, 0);
        const exponential_of<wide_pair> found(pairs, h, scale);
        step.error = select(needs_pairs, error_of(pairs, h, scale, found), 0.0);
        for_each_entry(found.value, [&](std::size_t k, int i, int j) {
            if (k == 0) step.phi(i, j) = select(needs_pairs, rounded(found.value.a(i, j)), step.phi(i, j));
            if (k == 1) step.gamma(i, j) = select(needs_pairs, rounded(found.value.g(i, j)), step.gamma(i, j));
        });
    }
    for (int i = 0; i < a.rows(); ++i) {
        for (int j = 0; j < a.columns(); ++j) {
            // What dies within a step leaves a zero: subnormal numbers would make every sample slow.
            const wide balanced = select(absolute(step.phi(i, j)) < nothing, 0.0, step.phi(i, j));
            step.phi(i, j) = balanced * unit(i, 0) / unit(j, 0);
        }
        for (int j = 0; j < v.g.columns(); ++j) step.gamma(i, j) *= unit(i, 0);
    }
    return step;
}

} // namespace windage
