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

/// (tanh(v) - v) / v^3 in powers of v^2 for |v| <= 0.55.
inline constexpr double hyperbolic_tangent_rest[] = {
    -0x1.5555555555497p-2, 0x1.1111111102233p-3,   -0x1.ba1ba1ad18315p-5, 0x1.664f45b2214a9p-6,   -0x1.226ddb8484734p-7,
    0x1.d6c5e46a95d80p-9,  -0x1.7cf1829267aebp-10, 0x1.2f952e995ae74p-11, -0x1.b8b1a599f7fb7p-13, 0x1.ab0b1c86c340ep-15,
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

/// tanh x. Domain: all x. Error at most 1.8 ULP (measured: 1.63).
///
/// Below 0.55 a polynomial. Above, |x| = k ln(2)/2 + h and, with s = 2^-k and t = tanh h,
/// tanh |x| = 1 - 2 s (1 - t) / ((1 + t) + s (1 - t)): one division whose error is scaled down by 1 - tanh |x| < 1/2.
/// The same polynomial serves |x| and h.
template <int W> WINDAGE_INLINE pack<W> hyperbolic_tangent(pack<W> x) {
    const pack<W> magnitude = minimum(absolute(x), pack<W>(20.0)); // tanh rounds to 1 above 19.07
    const mask<W> near = magnitude < 0.55;
    const pack<W> shifted = magnitude * (2.0 * detail::log2_e) + detail::integer_shifter;
    const pack<W> k = shifted - detail::integer_shifter;
    const pack<W> h = (magnitude - k * detail::half_ln2_high) - k * detail::half_ln2_low;
    const pack<W> v = select(near, magnitude, h);
    const pack<W> z = v * v;
    const pack<W> t = v + (v * z) * detail::polynomial(z, detail::hyperbolic_tangent_rest);
    const pack<W> s = from_bits(detail::subtract_bits(bits_of(pack<W>(1.0)), detail::shift_left(bits_of(shifted), 52)));
    const pack<W> st = s * t; // exact: s is a power of two
    const pack<W> far = 1.0 + 2.0 * (st - s) / ((1.0 + s) + (t - st));
    return copy_sign(select(near, t, far), x);
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
