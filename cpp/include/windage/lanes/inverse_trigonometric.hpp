// arc_sine, arc_cosine, arc_tangent, arc_tangent2 on packs.
//
// Guarantee: the same bits for every W and instruction set; NaN in gives NaN out; signed zeros and infinities as in
// ISO C99 annex F.9.1; largest errors as stated at each function, measured against multiple precision.
#pragma once

#include <windage/lanes/pack.hpp>
#include <windage/lanes/polynomial.hpp>

namespace windage {

namespace detail {
/// pi/4 in two pieces; the first ends with three zero bits, so that up to four times it is exact.
inline constexpr double quarter_pi_high = 0x1.921fb54442d18p-1;
inline constexpr double quarter_pi_low = 0x1.1a62633145c07p-55;

/// (atan(t) - t) / t^3 in powers of t^2 for |t| <= 1/2.
inline constexpr double arc_tangent_rest[] = {
    -0x1.5555555555516p-2, 0x1.999999999112ep-3, -0x1.249249215d64cp-3, 0x1.c71c7090ba936p-4,
    -0x1.745cf4c67beecp-4, 0x1.3b113d74d9272p-4, -0x1.10f31c0047a8ep-4, 0x1.dfe94cf7d8d21p-5,
    -0x1.a397a4553aacdp-5, 0x1.56f39e99f64a8p-5, -0x1.c178d0890da42p-6, 0x1.4b7a225763bd6p-7,
};
/// (asin(s) - s) / s^3 in powers of s^2 for |s| <= 1/2.
inline constexpr double arc_sine_rest[] = {
    0x1.5555555555577p-3, 0x1.333333332e0e3p-4,  0x1.6db6db7215ab2p-5, 0x1.f1c71a93ce8e9p-6, 0x1.6e8bdeff0c25bp-6,
    0x1.1c49ee432aa62p-6, 0x1.ca1fbee292dcdp-7,  0x1.7583f99675bdfp-7, 0x1.6145410a07e83p-7, 0x1.e5725306aa528p-9,
    0x1.63c45d5010483p-6, -0x1.58361db7718a8p-6, 0x1.0b588592fcd66p-5,
};

/// The angle offset * pi/4 + atan(numerator / denominator), the quotient at most 1/2 in size.
template <int W> WINDAGE_INLINE pack<W> arc_tangent_kernel(pack<W> t, pack<W> offset) {
    const pack<W> z = t * t;
    const pack<W> rest = (t * z) * polynomial(z, arc_tangent_rest);
    return offset * quarter_pi_high + (t + (rest + offset * quarter_pi_low));
}

/// asin s = s + rest for 0 <= s <= 1/2, where for |x| > 1/2 the half-angle sqrt((1 - |x|)/2) takes the place of |x|.
template <int W> struct arc_sine_parts {
    mask<W> large; ///< |x| > 1/2
    pack<W> s, rest;
};

template <int W> WINDAGE_INLINE arc_sine_parts<W> reduce_arc_sine(pack<W> magnitude) {
    const mask<W> large = magnitude > 0.5;
    const pack<W> z = select(large, (1.0 - magnitude) * 0.5, magnitude * magnitude);
    const pack<W> s = select(large, square_root(z), magnitude);
    return {large, s, (s * z) * polynomial(z, arc_sine_rest)};
}
} // namespace detail

/// Angle of the point (x, y) in (-pi, pi]; every x and y. Error at most 1.7 ULP (measured: 1.50).
///
/// One division: smaller over larger coordinate if that is at most 1/2, else (smaller - larger) / (smaller + larger)
/// and pi/4 is added; octants are put together as multiples of pi/4, which are exact.
template <int W> WINDAGE_INLINE pack<W> arc_tangent2(pack<W> y, pack<W> x) {
    const pack<W> size_x = absolute(x), size_y = absolute(y);
    const mask<W> steep = size_y > size_x;
    const pack<W> smaller = select(steep, size_x, size_y), larger = select(steep, size_y, size_x);
    // (infinite, infinite) means the diagonal; (0, 0) the axis; huge numbers are scaled so that the sum stays finite.
    const mask<W> diagonal = (size_x == detail::infinity) & (size_y == detail::infinity);
    const pack<W> scale = select(larger > 0x1p1000, 0x1p-100, pack<W>(1.0));
    const pack<W> a = select(diagonal, 1.0, smaller * scale);
    const pack<W> b = select(diagonal, 1.0, select(larger == 0.0, 1.0, larger * scale));
    const mask<W> middle = a > 0.5 * b;
    const pack<W> t = select(middle, a - b, a) / select(middle, a + b, b);
    const mask<W> left = copy_sign(pack<W>(1.0), x) < 0.0;
    const pack<W> first = as_number(middle);
    const pack<W> second = select(steep, 2.0 - first, first);
    const pack<W> offset = select(left, 4.0 - second, second);
    // Each reflection turns the sign of t: one where exactly one of them happens.
    const integer_pack<W> reflected = steep.bits ^ left.bits;
    return copy_sign(detail::arc_tangent_kernel(detail::flip_sign(t, reflected), offset), y);
}

/// atan x; the bits of arc_tangent2(x, 1). Domain: all x. Error at most 1.7 ULP (measured: 1.42).
template <int W> WINDAGE_INLINE pack<W> arc_tangent(pack<W> x) {
    const pack<W> magnitude = absolute(x);
    const mask<W> steep = magnitude > 1.0;
    const pack<W> a = select(steep, 1.0, magnitude), b = select(steep, magnitude, 1.0);
    const mask<W> middle = a > 0.5 * b;
    const pack<W> t = select(middle, a - b, a) / select(middle, a + b, b);
    const pack<W> first = as_number(middle);
    const pack<W> offset = select(steep, 2.0 - first, first);
    return copy_sign(detail::arc_tangent_kernel(detail::flip_sign(t, steep.bits), offset), x);
}

/// asin x. Domain: |x| <= 1, NaN beyond. Error at most 1.8 ULP (measured: 1.62).
template <int W> WINDAGE_INLINE pack<W> arc_sine(pack<W> x) {
    const auto parts = detail::reduce_arc_sine(absolute(x));
    // pi/2 - 2 (s + rest)
    const pack<W> large = 2.0 * detail::quarter_pi_high - (2.0 * parts.s - 2.0 * (detail::quarter_pi_low - parts.rest));
    return copy_sign(select(parts.large, large, parts.s + parts.rest), x);
}

/// acos x. Domain: |x| <= 1, NaN beyond. Error at most 1.3 ULP (measured: 1.12).
template <int W> WINDAGE_INLINE pack<W> arc_cosine(pack<W> x) {
    const auto parts = detail::reduce_arc_sine(absolute(x));
    const mask<W> negative = x < 0.0;
    // pi/2 - asin v: v is x itself where |x| <= 1/2; for x < -1/2 twice the angle of the half-angle.
    const mask<W> reflect = negative & !parts.large;
    const pack<W> s = select(reflect, -parts.s, parts.s), rest = select(reflect, -parts.rest, parts.rest);
    const pack<W> right = 2.0 * detail::quarter_pi_high - (s - (2.0 * detail::quarter_pi_low - rest));
    const pack<W> doubled = 2.0 * select(negative, right, parts.s + parts.rest);
    return select(parts.large, doubled, right);
}

/// Scalars: one lane of the pack, hence the same bits.
WINDAGE_INLINE double arc_sine(double x) { return arc_sine(pack<1>(x))[0]; }
WINDAGE_INLINE double arc_cosine(double x) { return arc_cosine(pack<1>(x))[0]; }
WINDAGE_INLINE double arc_tangent(double x) { return arc_tangent(pack<1>(x))[0]; }
WINDAGE_INLINE double arc_tangent2(double y, double x) { return arc_tangent2(pack<1>(y), pack<1>(x))[0]; }

} // namespace windage
