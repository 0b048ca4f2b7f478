// power(x, y) on packs.
//
// Guarantee: the same bits for every W and instruction set; special cases as in ISO C99 annex F.9.4.4. The logarithm
// is carried in two doubles (about 64 good bits), so that the error stays near 1 ULP over the whole range of results.
// Exact products without fused multiply-add: T. J. Dekker, A floating-point technique for extending the available
// precision, Numerische Mathematik 18 (1971) 224-242.
#pragma once

#include <windage/lanes/exponential.hpp>
#include <windage/lanes/pack.hpp>
#include <windage/lanes/polynomial.hpp>

namespace windage {

namespace detail {
/// (3 atanh(s) / s - 3 - s^2) / s^4 in powers of s^2.
inline constexpr double power_rest[] = {
    0x1.3333333333464p-1, 0x1.b6db6db683bb7p-2, 0x1.555555a21074dp-2, 0x1.1745af693930ep-2,
    0x1.d8ae628d14431p-3, 0x1.973fd284e800bp-3, 0x1.9564763533e69p-3,
};
/// 2 / (3 ln 2), whole and in two pieces of which the first has 26 bits.
inline constexpr double log2_factor = 0x1.ec709dc3a03fdp-1;
inline constexpr double log2_factor_high = 0x1.ec709e0000000p-1;
inline constexpr double log2_factor_low = -0x1.e2fe0145b01f5p-28;

/// A number as an unevaluated sum; `high` has at most 26 bits, so that products of two of them are exact.
template <int W> struct split_number {
    pack<W> high, low;
};

/// high + low from a number with at most 52 bits and a much smaller one.
template <int W> WINDAGE_INLINE split_number<W> renormalise(pack<W> large, pack<W> small) {
    const pack<W> high = upper_half(large + small);
    return {high, small - (high - large)};
}

/// log2 of a positive normal number, relative error about 2^-64.
/// With s = (m - 1)/(m + 1): log2 m = 2/(3 ln 2) s (3 + s^2 + s^4 Q(s^2)).
template <int W> WINDAGE_INLINE split_number<W> logarithm2_split(binary_parts<W> x) {
    const pack<W> m = x.fraction, f = m - 1.0, g = m + 1.0;
    const pack<W> inverse = 1.0 / g;
    const pack<W> s1 = upper_half(f * inverse);
    const pack<W> g1 = upper_half(g), g2 = m - (g1 - 1.0);
    const pack<W> s2 = ((f - s1 * g1) - s1 * g2) * inverse; // remainder of the long division
    const pack<W> s = s1 + s2;
    const pack<W> z1 = s1 * s1, z2 = s2 * (s1 + s);
    const pack<W> z = z1 + z2;
    const pack<W> tail = z2 + (z * z) * polynomial(z, power_rest);
    // v = 3 + z1 + tail; s v; times the factor; plus the exponent. Each time the large part first.
    const pack<W> v_high = upper_half(3.0 + (z1 + tail));
    const pack<W> v_low = tail - ((v_high - 3.0) - z1);
    const auto product = renormalise(s1 * v_high, s2 * v_high + s * v_low);
    const pack<W> scaled = product.high * log2_factor_high;
    const pack<W> scaled_low = product.high * log2_factor_low + product.low * log2_factor;
    const pack<W> high = upper_half((scaled + scaled_low) + x.exponent);
    return {high, scaled_low - ((high - x.exponent) - scaled)};
}

/// x * 2^k, subnormal and overflowing results included; |k| <= 1100. Two factors 2^(k/2), the first product exact.
template <int W> WINDAGE_INLINE pack<W> scale_any(pack<W> x, pack<W> shifted) {
    const integer_pack<W> moved = // k + 2048
        subtract_bits(bits_of(shifted), integer_pack<W>(integer_shifter_bits - 2048));
    const integer_pack<W> half = shift_right(moved, 1);
    const integer_pack<W> one(1), other = subtract_bits(moved, half);
    return (x * from_bits(shift_left(subtract_bits(half, one), 52))) *
           from_bits(shift_left(subtract_bits(other, one), 52));
}

/// |x|^y for 0 < |x| < infinity.
template <int W> WINDAGE_INLINE pack<W> power_magnitude(pack<W> magnitude, pack<W> y) {
    const mask<W> subnormal = magnitude < 0x1p-1022;
    binary_parts<W> parts = split_binary(select(subnormal, magnitude * 0x1p54, magnitude));
    parts.exponent = parts.exponent - select(subnormal, 54.0, pack<W>(0.0));
    const auto logarithm = logarithm2_split(parts);
    const pack<W> limited = clip(y, pack<W>(-0x1p70), pack<W>(0x1p70)); // beyond, the result is 0, 1 or infinity
    const pack<W> y1 = upper_half(limited), y2 = limited - y1;
    const pack<W> large = y1 * logarithm.high;
    const pack<W> small = y2 * logarithm.high + limited * logarithm.low;
    const pack<W> exponent = large + small;
    const pack<W> shifted = clip(exponent, pack<W>(-1100.0), pack<W>(1100.0)) + integer_shifter;
    const pack<W> fraction = (large - (shifted - integer_shifter)) + small;
    const pack<W> y_inside = scale_any(exponential_kernel(fraction * 0x1.62e42fefa39efp-1), shifted);
    return select(exponent > 1100.0, infinity, select(exponent < -1100.0, 0.0, y_inside));
}

template <int W> WINDAGE_INLINE mask<W> is_whole(pack<W> magnitude) {
    return (((magnitude + 0x1p52) - 0x1p52) == magnitude) | (magnitude >= 0x1p52);
}
} // namespace detail

/// x^y. Domain: all x and y; subnormal results included. Error at most 1.4 ULP (measured: 1.27).
/// 1 if y = 0 or x = 1; NaN for x < 0 unless y is an integer; odd integers keep the sign of x.
template <int W> WINDAGE_INLINE pack<W> power(pack<W> x, pack<W> y) {
    const pack<W> magnitude = absolute(x), size = absolute(y), half = 0.5 * size;
    const mask<W> whole = detail::is_whole(size), odd = whole & !detail::is_whole(half);
    const mask<W> grows = y > 0.0, zero = magnitude == 0.0, infinite = magnitude == detail::infinity;
    const pack<W> regular = detail::power_magnitude(magnitude, y);
    const pack<W> extreme = select(mask<W>{grows.bits ^ zero.bits}, detail::infinity, pack<W>(0.0));
    const pack<W> unsigned_result = select(zero | infinite, extreme, regular);
    const pack<W> signed_result = detail::flip_sign(unsigned_result, bits_of(x) & odd.bits);
    const mask<W> outside = (x < 0.0) & !infinite & !whole;
    const pack<W> real_result = select(outside, pack<W>(detail::undefined), signed_result);
    const pack<W> result = select((x == x) & (y == y), real_result, x + y);
    return select((y == 0.0) | (x == 1.0), 1.0, result);
}

/// Scalars: one lane of the pack, hence the same bits.
WINDAGE_INLINE double power(double x, double y) { return power(pack<1>(x), pack<1>(y))[0]; }

} // namespace windage
