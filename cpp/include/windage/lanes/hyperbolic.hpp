// hyperbolic_tangent, hyperbolic_sine, hyperbolic_cosine on packs.
//
// Guarantee: the same bits for every W and instruction set; NaN in gives NaN out; odd functions are odd to the bit;
// largest errors as stated at each function, measured against multiple precision. hyperbolic_tangent is the hottest
// function of friction models: one division and one polynomial.
#pragma once

#include <windage/lanes/exponential.hpp>
#include <windage/lanes/pack.hpp>
#include <windage/lanes/polynomial.hpp>

namespace windage {

namespace detail {
/// ln(2)/2 in two pieces; the first has 46 bits, so that its product with k <= 58 is exact.
inline constexpr double half_ln2_high = 0x1.62e42fefa3a00p-2;
inline constexpr double half_ln2_low = -0x1.0ca86c3898d00p-50;

/// (tanh(h) - h) / h^3 in powers of h^2 for |h| <= ln(2)/4.
inline constexpr double hyperbolic_tangent_rest[] = {
    -0x1.55555555554bcp-2, 0x1.11111110e0756p-3,  -0x1.ba1ba1165aff6p-5,
    0x1.664ec995c4e66p-6,  -0x1.223c61ff4e0b2p-7, 0x1.c3803ce5ea1b2p-9,
};

/// (sinh(x) - x) / x^3 in powers of x^2 for |x| <= 1.
inline constexpr double hyperbolic_sine_rest[] = {
    0x1.5555555555556p-3,  0x1.11111111110a6p-7,  0x1.a01a01a0289bbp-13, 0x1.71de3a46598f3p-19,
    0x1.ae64671c62b6ap-26, 0x1.611a559897137p-33, 0x1.b4c784535a083p-41,
};

/// e^x / 2 for 0 <= x; the largest argument with a finite result is ln(2^1025).
template <int W> WINDAGE_INLINE pack<W> half_exponential(pack<W> x) {
    const auto reduced = reduce_exponential(x);
    const pack<W> y = scale_normal(exponential_kernel(reduced.remainder), reduced.shifted - 1.0);
    return select(x <= 0x1.633ce8fb9f87dp+9, y, x * infinity);
}
} // namespace detail

/// tanh x. Domain: all x. Error at most 2.7 ULP (measured: 2.48).
///
/// |x| = k ln(2)/2 + h with |h| <= ln(2)/4. With s = 2^-k, hence tanh(k ln(2)/2) = (1 - s) / (1 + s), and t = tanh h,
/// the addition theorem gives tanh |x| = ((1 - s) + (1 + s) t) / ((1 + s) + (1 - s) t): one division, no branch, and t
/// itself near zero, where s is 1.
template <int W> WINDAGE_INLINE pack<W> hyperbolic_tangent(pack<W> x) {
    const pack<W> magnitude = minimum(absolute(x), pack<W>(20.0)); // tanh rounds to 1 above 19.07
    const pack<W> shifted = magnitude * (2.0 * detail::log2_e) + detail::integer_shifter;
    const pack<W> k = shifted - detail::integer_shifter;
    const pack<W> h = (magnitude - k * detail::half_ln2_high) - k * detail::half_ln2_low;
    const pack<W> z = h * h;
    const pack<W> t = h + (h * z) * detail::polynomial(z, detail::hyperbolic_tangent_rest);
    const pack<W> s = from_bits(detail::subtract_bits(bits_of(pack<W>(1.0)), detail::shift_left(bits_of(shifted), 52)));
    const pack<W> below = 1.0 - s, above = 1.0 + s;
    return copy_sign((below + above * t) / (above + below * t), x);
}

/// sinh x. Domain: all x; infinite above 710.4758. Error at most 1.9 ULP (measured: 1.65).
template <int W> WINDAGE_INLINE pack<W> hyperbolic_sine(pack<W> x) {
    const pack<W> magnitude = absolute(x);
    const pack<W> half = detail::half_exponential(magnitude);
    const pack<W> large = half - 0.25 / half;
    const pack<W> z = magnitude * magnitude;
    const pack<W> small = magnitude + (magnitude * z) * detail::polynomial(z, detail::hyperbolic_sine_rest);
    return copy_sign(select(magnitude < 1.0, small, large), x);
}

/// cosh x. Domain: all x; infinite above 710.4758. Error at most 1.6 ULP (measured: 1.41).
template <int W> WINDAGE_INLINE pack<W> hyperbolic_cosine(pack<W> x) {
    const pack<W> half = detail::half_exponential(absolute(x));
    return half + 0.25 / half;
}

/// Scalars: one lane of the pack, hence the same bits.
WINDAGE_INLINE double hyperbolic_tangent(double x) { return hyperbolic_tangent(pack<1>(x))[0]; }
WINDAGE_INLINE double hyperbolic_sine(double x) { return hyperbolic_sine(pack<1>(x))[0]; }
WINDAGE_INLINE double hyperbolic_cosine(double x) { return hyperbolic_cosine(pack<1>(x))[0]; }

} // namespace windage
