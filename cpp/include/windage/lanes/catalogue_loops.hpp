// The loops behind catalogue.hpp for any pack width; included by its source and by the check program, which compares
// the scalar with the wide pack.
#pragma once

#include <algorithm>
#include <cstddef>
#include <cstdint>
#include <string_view>

#include <windage/lanes/catalogue.hpp>
#include <windage/lanes/elementary.hpp>
#include <windage/lanes/normal.hpp>
#include <windage/lanes/pack.hpp>

namespace windage::detail {

using array_function = void (*)(const double* x, const double* y, double* out, std::size_t n);

struct catalogue_entry {
    std::string_view name;
    int arguments;
    array_function apply;
};

/// The last, partial pack works on copies padded with ones.
template <int W> struct padded {
    double value[W];
    padded(const double* from, std::size_t count) {
        std::fill(value, value + W, 1.0);
        std::copy(from, from + count, value);
    }
};

template <int W, class Function> void apply_unary(const double* x, const double*, double* out, std::size_t n) {
    std::size_t i = 0;
    for (; i + W <= n; i += W) Function::call(pack<W>::load(x + i)).store(out + i);
    if (i == n) return;
    double last[W];
    Function::call(pack<W>::load(padded<W>(x + i, n - i).value)).store(last);
    std::copy(last, last + (n - i), out + i);
}

template <int W, class Function> void apply_binary(const double* x, const double* y, double* out, std::size_t n) {
    std::size_t i = 0;
    for (; i + W <= n; i += W) Function::call(pack<W>::load(x + i), pack<W>::load(y + i)).store(out + i);
    if (i == n) return;
    double last[W];
    Function::call(pack<W>::load(padded<W>(x + i, n - i).value), pack<W>::load(padded<W>(y + i, n - i).value))
        .store(last);
    std::copy(last, last + (n - i), out + i);
}

#define WINDAGE_UNARY_FUNCTIONS(X)                                                                                     \
    X(sine)                                                                                                            \
    X(cosine)                                                                                                          \
    X(tangent)                                                                                                         \
    X(sine_of_turn)                                                                                                    \
    X(cosine_of_turn)                                                                                                  \
    X(arc_sine)                                                                                                        \
    X(arc_cosine)                                                                                                      \
    X(arc_tangent)                                                                                                     \
    X(exponential)                                                                                                     \
    X(exponential_minus_one)                                                                                           \
    X(logarithm)                                                                                                       \
    X(logarithm_one_plus)                                                                                              \
    X(hyperbolic_sine)                                                                                                 \
    X(hyperbolic_cosine)                                                                                               \
    X(hyperbolic_tangent)                                                                                              \
    X(square_root)                                                                                                     \
    X(normal_upper_tail)                                                                                               \
    X(normal_cdf)                                                                                                      \
    X(normal_quantile)                                                                                                 \
    X(floor)                                                                                                           \
    X(nearest_integer)
#define WINDAGE_BINARY_FUNCTIONS(X)                                                                                    \
    X(arc_tangent2)                                                                                                    \
    X(power)                                                                                                           \
    X(floored_remainder)

template <int W> WINDAGE_INLINE pack<W> sine_of_turn(pack<W> u) { return sine_cosine_turn(u).sine; }
template <int W> WINDAGE_INLINE pack<W> cosine_of_turn(pack<W> u) { return sine_cosine_turn(u).cosine; }

#define WINDAGE_DEFINE_UNARY(NAME)                                                                                     \
    struct call_##NAME {                                                                                               \
        template <int W> static WINDAGE_INLINE pack<W> call(pack<W> x) { return NAME(x); }                             \
    };
#define WINDAGE_DEFINE_BINARY(NAME)                                                                                    \
    struct call_##NAME {                                                                                               \
        template <int W> static WINDAGE_INLINE pack<W> call(pack<W> x, pack<W> y) { return NAME(x, y); }               \
    };
WINDAGE_UNARY_FUNCTIONS(WINDAGE_DEFINE_UNARY)
WINDAGE_BINARY_FUNCTIONS(WINDAGE_DEFINE_BINARY)
#undef WINDAGE_DEFINE_UNARY
#undef WINDAGE_DEFINE_BINARY

/// The catalogue for packs of width W.
#define WINDAGE_LIST_UNARY(NAME) {#NAME, 1, &apply_unary<W, call_##NAME>},
#define WINDAGE_LIST_BINARY(NAME) {#NAME, 2, &apply_binary<W, call_##NAME>},
template <int W> inline constexpr catalogue_entry catalogue[] = {WINDAGE_UNARY_FUNCTIONS(WINDAGE_LIST_UNARY)
                                                                     WINDAGE_BINARY_FUNCTIONS(WINDAGE_LIST_BINARY)};
#undef WINDAGE_LIST_UNARY
#undef WINDAGE_LIST_BINARY

enum class draw_kind { uniform, normal };

template <int W, draw_kind Kind>
void apply_draws(stream_key key, std::uint32_t draw, std::uint64_t first_trial, double* a, double* b, std::size_t n) {
    for (std::size_t i = 0; i < n; i += W) {
        pack<W> first, second;
        if constexpr (Kind == draw_kind::uniform)
            uniform_pair(first_trial + i, key, draw, first, second);
        else
            normal_pair(first_trial + i, key, draw, first, second);
        if (i + W <= n) {
            first.store(a + i);
            second.store(b + i);
            continue;
        }
        for (int lane = 0; lane < int(n - i); ++lane) {
            a[i + lane] = first[lane];
            b[i + lane] = second[lane];
        }
    }
}

} // namespace windage::detail
