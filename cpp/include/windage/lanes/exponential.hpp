// exponential, exponential_minus_one, logarithm, logarithm_one_plus on packs.
//
// Guarantee: the same bits for every W and instruction set; NaN in gives NaN out; largest errors as stated at each
// function, measured against multiple precision (tests/external/elementary_reference.py). Not correctly rounded.
// Coefficients: tests/external/fit_elementary.py. Reductions: W. J. Cody and W. Waite, Software Manual for the
// Elementary Functions, Prentice-Hall 1980, chapters 5 and 6.
#pragma once

#include <windage/lanes/pack.hpp>
#include <windage/lanes/polynomial.hpp>

namespace windage {

namespace detail {
inline constexpr double log2_e = 0x1.71547652b82fep+0;
/// ln 2 in two pieces; the first has 42 bits, so that its product with an exponent (11 bits) is exact.
inline constexpr double ln2_high = 0x1.62e42fefa3800p-1;
inline constexpr double ln2_low = 0x1.ef35793c76730p-45;

/// (e^r - 1 - r) / r^2 for |r| <= ln(2)/2; the first coefficient is exact.
inline constexpr double exponential_rest[] = {
    0.5,
    0x1.5555555555501p-3,
    0x1.5555555553207p-5,
    0x1.1111111128879p-7,
    0x1.6c16c17cc349fp-10,
    0x1.a01a011c236b0p-13,
    0x1.a019ab2ce1f8bp-16,
    0x1.71df55403b7e4p-19,
    0x1.289f8b30badfap-22,
    0x1.ad2019b17f8b3p-26,
};

/// x = k ln 2 + r with |r| <= ln(2)/2.
template <int W> struct exponential_reduction {
    pack<W> shifted;   ///< k + integer_shifter
    pack<W> remainder; ///< r, rounded
    pack<W> lost;      ///< what the rounding of r dropped
};

template <int W> WINDAGE_INLINE exponential_reduction<W> reduce_exponential(pack<W> x) {
    const pack<W> shifted = x * log2_e + integer_shifter;
    const pack<W> k = shifted - integer_shifter;
    const pack<W> high = x - k * ln2_high;
    const pack<W> low = k * ln2_low;
    const pack<W> remainder = high - low;
    return {shifted, remainder, (high - remainder) - low};
}

/// e^r for |r| <= ln(2)/2: between 0.7 and 1.42.
template <int W> WINDAGE_INLINE pack<W> exponential_kernel(pack<W> r) {
    return (r + (r * r) * polynomial(r, exponential_rest)) + 1.0;
}

/// (2 atanh(s) - 2 s) / s^3 in powers of s^2, for m = (1 + s) / (1 - s) between sqrt(1/2) and sqrt(2).
inline constexpr double logarithm_rest[] = {
    0x1.5555555555592p-1, 0x1.999999997fd76p-2, 0x1.24924941f5107p-2, 0x1.c71c5205f74fbp-3,
    0x1.74663fa554d0ep-3, 0x1.39a1a6abf2961p-3, 0x1.2f06373abc3b8p-3,
};

/// A positive normal number as m 2^k with m between sqrt(1/2) and sqrt(2).
template <int W> struct binary_parts {
    pack<W> fraction; ///< m
    pack<W> exponent; ///< k as a number
};

/// Subtracting the bits of sqrt(1/2) makes the exponent field change at sqrt(1/2) instead of 1; 1024 is added to it so
/// that it stays positive. x = 3: field 0x4008... becomes 1024 + 2, hence k = 2 and m = 0.75.
template <int W> WINDAGE_INLINE binary_parts<W> split_binary(pack<W> x) {
    constexpr std::int64_t half_root = 0x3fe6a09e667f3bcd, offset = std::int64_t(1024) << 52;
    const integer_pack<W> moved = add_bits(bits_of(x), integer_pack<W>(offset - half_root));
    const integer_pack<W> field = shift_right(moved, 52);
    const pack<W> exponent = from_bits(field | bits_of(pack<W>(0x1p52))) - (0x1p52 + 1024.0);
    const integer_pack<W> field_bits = moved & std::int64_t(0xfff0000000000000ull);
    const pack<W> fraction = from_bits(subtract_bits(add_bits(bits_of(x), integer_pack<W>(offset)), field_bits));
    return {fraction, exponent};
}

/// ln(m 2^k) + tail. With f = m - 1 (exact) and s = f / (2 + f), ln m = 2 atanh s = f - s (f - s^2 R(s^2)): the leading
/// term carries no rounding error.
template <int W> WINDAGE_INLINE pack<W> logarithm_kernel(binary_parts<W> x, pack<W> tail) {
    const pack<W> f = x.fraction - 1.0;
    const pack<W> s = f / (f + 2.0);
    const pack<W> z = s * s;
    const pack<W> bend = s * (f - z * polynomial(z, logarithm_rest));
    return x.exponent * ln2_high + (f - (bend - (x.exponent * ln2_low + tail)));
}
} // namespace detail

/// e^x. Domain: all x; +infinity above 709.78, 0 below -708 (no subnormal results). Error at most 1.1 ULP
/// (measured: 1.01).
template <int W> WINDAGE_INLINE pack<W> exponential(pack<W> x) {
    const auto reduced = detail::reduce_exponential(x);
    const pack<W> y = detail::scale_normal(detail::exponential_kernel(reduced.remainder), reduced.shifted);
    // x * infinity keeps an undefined x undefined, whatever its payload did to the exponent field.
    const pack<W> upper = select(x <= 0x1.62e42fefa39efp+9, y, x * detail::infinity);
    return select(x < -708.0, 0.0, upper);
}

/// e^x - 1 without cancellation near 0. Domain: all x. Error at most 1.4 ULP (measured: 1.24).
template <int W> WINDAGE_INLINE pack<W> exponential_minus_one(pack<W> x) {
    const auto reduced = detail::reduce_exponential(clip(x, pack<W>(-40.0), pack<W>(710.0)));
    const pack<W> r = reduced.remainder;
    const pack<W> rest = (r * r) * detail::polynomial(r, detail::exponential_rest) + reduced.lost;
    // Half of the result, so that 2^k / 2 is finite up to the largest result: (2^k - 1 + 2^k r) / 2, error kept.
    const pack<W> scale = detail::scale_normal(pack<W>(0.5), reduced.shifted);
    const pack<W> constant = scale - 0.5;
    const pack<W> linear = scale * r;
    const pack<W> sum = constant + linear;
    const pack<W> lost = linear - (sum - constant);
    const pack<W> half = sum + (lost + scale * rest);
    return select(absolute(x) < 0x1p-54, x, half + half);
}

/// ln x. Domain: x >= 0, subnormal numbers included; ln 0 = -infinity, NaN for x < 0. Error at most 1.1 ULP
/// (measured: 0.96).
template <int W> WINDAGE_INLINE pack<W> logarithm(pack<W> x) {
    const mask<W> subnormal = x < 0x1p-1022;
    detail::binary_parts<W> parts = detail::split_binary(select(subnormal, x * 0x1p54, x));
    parts.exponent = parts.exponent - select(subnormal, 54.0, pack<W>(0.0));
    const pack<W> y = detail::logarithm_kernel(parts, pack<W>(0.0));
    const pack<W> upper = select(x < detail::infinity, y, x);
    return select(x > 0.0, upper, select(x == 0.0, -detail::infinity, pack<W>(detail::undefined)));
}

/// ln x for positive normal finite x only (no checks, same bits as `logarithm` there).
template <int W> WINDAGE_INLINE pack<W> logarithm_normal(pack<W> x) {
    return detail::logarithm_kernel(detail::split_binary(x), pack<W>(0.0));
}

/// ln(1 + x) without cancellation near 0. Domain: x >= -1. Error at most 1.1 ULP (measured: 0.95).
template <int W> WINDAGE_INLINE pack<W> logarithm_one_plus(pack<W> x) {
    const pack<W> u = x + 1.0;
    // What the rounding of 1 + x dropped; the larger term is subtracted first, so that it is exact.
    const pack<W> dropped = select(x < 1.0, x - (u - 1.0), 1.0 - (u - x));
    const pack<W> y = detail::logarithm_kernel(detail::split_binary(u), dropped / u);
    const pack<W> upper = select(x < detail::infinity, y, x);
    const pack<W> inside = select(u > 0.0, upper, select(u == 0.0, -detail::infinity, pack<W>(detail::undefined)));
    return select(absolute(x) < 0x1p-54, x, inside);
}

/// Scalars: one lane of the pack, hence the same bits.
WINDAGE_INLINE double exponential(double x) { return exponential(pack<1>(x))[0]; }
WINDAGE_INLINE double exponential_minus_one(double x) { return exponential_minus_one(pack<1>(x))[0]; }
WINDAGE_INLINE double logarithm(double x) { return logarithm(pack<1>(x))[0]; }
WINDAGE_INLINE double logarithm_one_plus(double x) { return logarithm_one_plus(pack<1>(x))[0]; }

} // namespace windage
