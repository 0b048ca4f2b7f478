// sine, cosine, sine_cosine, tangent on packs, and the sine and cosine of a fraction of a turn.
//
// Guarantee: the same bits for every W and instruction set; sine and cosine alone give the bits of sine_cosine; odd
// functions are odd to the bit. Accurate for |x| <= 2e5. From there to 2^30 the error is at most what half a unit in
// the last place of x would cause; above 2^30 the result is NaN: such an angle means that a trial has diverged.
// Reduction: W. J. Cody and W. Waite, Software Manual for the Elementary Functions, Prentice-Hall 1980, chapter 8.
#pragma once

#include <windage/lanes/pack.hpp>
#include <windage/lanes/polynomial.hpp>

namespace windage {

/// Sine and cosine of the same angle.
template <int W> struct sine_cosine_pair {
    pack<W> sine, cosine;
};

namespace detail {
inline constexpr double two_over_pi = 0x1.45f306dc9c883p-1;
/// pi/2 in three pieces. The first two have 36 bits: their products with |k| <= 2^17 are exact. The third ends 2^-129.
inline constexpr double half_pi_1 = 0x1.921fb54440000p+0;
inline constexpr double half_pi_2 = 0x1.68c234c4c0000p-39;
inline constexpr double half_pi_3 = 0x1.98a2e03707345p-77;
inline constexpr double largest_angle = 0x1p30;

/// (sin(r) - r) / r^3 and (cos(r) - 1 + r^2/2) / r^4 in powers of r^2 for |r| <= pi/4.
inline constexpr double sine_rest[] = {
    -0x1.5555555555549p-3, 0x1.111111110f87ap-7,   -0x1.a01a019c11970p-13,
    0x1.71de3577b4a47p-19, -0x1.ae5e663922ebbp-26, 0x1.5d93009ab815ap-33,
};
inline constexpr double cosine_rest[] = {
    0x1.555555555554cp-5,   -0x1.6c16c16c1517ep-10, 0x1.a01a019cb1bdep-16,
    -0x1.27e4f809f0bc2p-22, 0x1.1ee9ebe939ec1p-29,  -0x1.8fae9c7a52c6bp-37,
};
/// (tan(r) - r) / r^3 in powers of r^2 for |r| <= pi/4.
inline constexpr double tangent_rest[] = {
    0x1.55555555554f1p-2,   0x1.1111111118357p-3,  0x1.ba1ba1b465fdbp-5,   0x1.664f49a9601f8p-6,  0x1.226e1240f6c27p-7,
    0x1.d6d9372ecfecap-9,   0x1.7d5b33ace04d6p-10, 0x1.37fbdb6aa4b06p-11,  0x1.d26193ed2cd88p-13, 0x1.1e47e8b0897eep-13,
    -0x1.ba4f757a89b0bp-16, 0x1.771ad8b125592p-14, -0x1.785c3fea4fab1p-15, 0x1.5dfbcf4389968p-16,
};
/// (sin(pi/2 f) / f - pi/2) / f^2 and (cos(pi/2 f) - 1) / f^2 in powers of f^2 for |f| <= 1/2; pi/2 as a sum.
inline constexpr double half_pi_high = 0x1.921fb54442d18p+0;
inline constexpr double half_pi_low = 0x1.1a62633145c07p-54;
inline constexpr double turn_sine_rest[] = {
    -0x1.4abbce625be47p-1, 0x1.466bc67758d85p-4,   -0x1.32d2cce3332c5p-8,
    0x1.5078301b60c49p-13, -0x1.e300a658c527fp-19, 0x1.e403d00e64139p-25,
};
inline constexpr double turn_cosine[] = {
    -0x1.3bd3cc9be45dep+0,  0x1.03c1f081b5ab0p-2,  -0x1.55d3c7e3c95bcp-6,  0x1.e1f50683b429fp-11,
    -0x1.a6d1ecb73e232p-16, 0x1.f9cc6ace687f7p-22, -0x1.b26fe7fc4da18p-28,
};

/// |x| = k pi/2 + remainder + lost.
template <int W> struct angle_reduction {
    integer_pack<W> quadrant; ///< lowest bits: k
    pack<W> remainder;
    pack<W> lost;
};

/// The error of the second subtraction is kept (T. J. Dekker, 1971): near a multiple of pi/2 the remainder is as
/// accurate, relative to its size, as elsewhere.
template <int W> WINDAGE_INLINE angle_reduction<W> reduce_angle(pack<W> magnitude) {
    const pack<W> shifted = magnitude * two_over_pi + integer_shifter;
    const pack<W> k = shifted - integer_shifter;
    const pack<W> first = magnitude - k * half_pi_1;
    const pack<W> product = k * half_pi_2;
    const pack<W> second = first - product;
    const pack<W> low = ((first - second) - product) - k * half_pi_3;
    const pack<W> sum = second + low;
    const pack<W> remainder = select(magnitude <= largest_angle, sum, pack<W>(undefined));
    return {bits_of(shifted), remainder, (second - sum) + low};
}

/// Exchanges sine and cosine in odd quadrants and sets their signs (k = 1: sin = cos r, cos = -sin r).
template <int W>
WINDAGE_INLINE sine_cosine_pair<W> place_in_quadrant(pack<W> sine, pack<W> cosine, integer_pack<W> quadrant) {
    const mask<W> odd = lowest_bit(quadrant);
    return {flip_sign(select(odd, cosine, sine), shift_left(quadrant, 62)),
            flip_sign(select(odd, sine, cosine), shift_left(add_bits(quadrant, integer_pack<W>(1)), 62))};
}
} // namespace detail

/// sin x and cos x. Domain: |x| <= 2e5, degrading up to 2^30, NaN beyond. Error at most 1.7 ULP
/// (measured: 1.57; at the doubles next to every multiple of pi/2 up to 2e5: 0.5).
template <int W> WINDAGE_INLINE sine_cosine_pair<W> sine_cosine(pack<W> x) {
    const auto reduced = detail::reduce_angle(absolute(x));
    const pack<W> r = reduced.remainder;
    const pack<W> z = r * r;
    const pack<W> sine = r + (r * z) * detail::polynomial(z, detail::sine_rest);
    const pack<W> cosine = (1.0 - 0.5 * z) + (z * z) * detail::polynomial(z, detail::cosine_rest);
    auto pair = detail::place_in_quadrant(sine, cosine, reduced.quadrant);
    pair.sine = detail::flip_sign(pair.sine, bits_of(x));
    return pair;
}

/// sin x; domain and error of sine_cosine.
template <int W> WINDAGE_INLINE pack<W> sine(pack<W> x) { return sine_cosine(x).sine; }
/// cos x; domain and error of sine_cosine.
template <int W> WINDAGE_INLINE pack<W> cosine(pack<W> x) { return sine_cosine(x).cosine; }

/// sin and cos of 2 pi u: no reduction error, since 4 u minus the nearest integer is exact.
/// Domain: |u| <= 2^40. Error at most 1.7 ULP (measured: 1.63).
template <int W> WINDAGE_INLINE sine_cosine_pair<W> sine_cosine_turn(pack<W> u) {
    const pack<W> quarters = 4.0 * u;
    const pack<W> shifted = quarters + detail::integer_shifter;
    const pack<W> f = quarters - (shifted - detail::integer_shifter);
    const pack<W> z = f * f;
    const pack<W> sine =
        f * detail::half_pi_high + f * (z * detail::polynomial(z, detail::turn_sine_rest) + detail::half_pi_low);
    const pack<W> cosine = 1.0 + z * detail::polynomial(z, detail::turn_cosine);
    return detail::place_in_quadrant(sine, cosine, bits_of(shifted));
}

/// tan x. Domain: |x| <= 2e5, degrading up to 2^30, NaN beyond. Error at most 1.7 ULP
/// (measured: 1.47; at the doubles next to every multiple of pi/2 up to 2e5: 1.0).
template <int W> WINDAGE_INLINE pack<W> tangent(pack<W> x) {
    const auto reduced = detail::reduce_angle(absolute(x));
    const pack<W> r = reduced.remainder;
    const pack<W> z = r * r;
    const pack<W> rest = (r * z) * detail::polynomial(z, detail::tangent_rest) + (reduced.lost + reduced.lost * z);
    const pack<W> high = r + rest;
    const pack<W> low = rest - (high - r);
    // Odd quadrants: -1 / (high + low), to first order in low.
    const pack<W> inverse = 1.0 / high;
    const pack<W> odd_quadrant = (inverse * inverse) * low - inverse;
    const pack<W> y = select(detail::lowest_bit(reduced.quadrant), odd_quadrant, high);
    return detail::flip_sign(y, bits_of(x));
}

/// Scalars: one lane of the pack, hence the same bits.
WINDAGE_INLINE double sine(double x) { return sine(pack<1>(x))[0]; }
WINDAGE_INLINE double cosine(double x) { return cosine(pack<1>(x))[0]; }
WINDAGE_INLINE double tangent(double x) { return tangent(pack<1>(x))[0]; }

} // namespace windage
