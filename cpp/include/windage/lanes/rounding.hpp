// Nearest integer and floored remainder on packs.
//
// Guarantee: exact, hence the same bits for every W and instruction set.
// Exact products without fused multiply-add: T. J. Dekker, A floating-point technique for extending the available
// precision, Numerische Mathematik 18 (1971) 224-242.
#pragma once

#include <limits>

#include <windage/lanes/pack.hpp>
#include <windage/lanes/polynomial.hpp>

namespace windage {

namespace detail {
/// Largest quotient of a remainder: its two halves times those of the divisor are exact.
inline constexpr double largest_quotient = 0x1p51;

/// The rounding error of product = fl(count * x), for a whole number |count| < 2^51.
template <int W> WINDAGE_INLINE pack<W> product_error(pack<W> count, pack<W> x, pack<W> product) {
    const pack<W> count_high = copy_sign(floor(absolute(count) * 0x1p-26) * 0x1p26, count);
    const pack<W> count_low = count - count_high, x_high = upper_half(x), x_low = x - x_high;
    return count_low * x_low - (((product - count_high * x_high) - count_low * x_high) - count_high * x_low);
}
} // namespace detail

/// Nearest integer, ties to even, for every x; zeros keep the sign of x.
template <int W> WINDAGE_INLINE pack<W> nearest_integer(pack<W> x) {
    return select(absolute(x) < 0x1p52, copy_sign((absolute(x) + 0x1p52) - 0x1p52, x), x);
}

/// x - divisor * floor(x / divisor) for the exact quotient: from 0 to the divisor and of its sign, also where it is
/// zero. It is exact where |x| >= |divisor|, otherwise rounded once (so that -1e-20 gives the divisor itself).
/// Undefined for a divisor of zero, infinite arguments, and quotients of 2^51 and more.
template <int W> WINDAGE_INLINE pack<W> floored_remainder(pack<W> x, pack<W> divisor) {
    const pack<W> quotient = floor(x / divisor), product = quotient * divisor;
    pack<W> rest = (x - product) - detail::product_error(quotient, divisor, product);
    // A quotient that was rounded up to a whole number is one too large.
    const auto is_short = ((rest < 0.0) & (divisor > 0.0)) | ((rest > 0.0) & (divisor < 0.0));
    rest = select(is_short, rest + divisor, rest);
    rest = select(rest == 0.0, copy_sign(pack<W>(0.0), divisor), rest);
    return select(absolute(quotient) < detail::largest_quotient, rest, std::numeric_limits<double>::quiet_NaN());
}

} // namespace windage
