// Twice the digits: a number as the unevaluated sum of two packs, 106 bits, by error-free transformations.
//
// Sum of Knuth 1969 (The Art of Computer Programming 2, section 4.2.2, from memory) and product of Dekker 1971, "A
// floating-point technique for extending the available precision", Numer. Math. 18, 224-242, without a fused
// multiply-add, so that every instruction set has the same digits. Each operation errs by a few 2^-104 of its operands;
// factors above 2^996 overflow. For what is prepared once a block, not for what moves.
#pragma once

#include <windage/lanes/pack.hpp>

namespace windage {

struct wide_pair {
    wide high, low;

    wide_pair() = default;
    WINDAGE_INLINE wide_pair(wide x) : high(x), low(0.0) {}
    WINDAGE_INLINE wide_pair(double x) : high(x), low(0.0) {}
    WINDAGE_INLINE wide_pair(wide h, wide l) : high(h), low(l) {}
};

namespace detail {

/// high + low of two numbers of which the first is not the smaller one.
WINDAGE_INLINE wide_pair ordered_sum(wide a, wide b) {
    const wide s = a + b;
    return {s, b - (s - a)};
}
WINDAGE_INLINE wide_pair exact_sum(wide a, wide b) {
    const wide s = a + b, t = s - a;
    return {s, (a - (s - t)) + (b - t)};
}
/// Halves of 26 bits, whose products are exact.
WINDAGE_INLINE wide_pair halves(wide a) {
    const wide t = 134217729.0 * a, high = t - (t - a); // 2^27 + 1
    return {high, a - high};
}
WINDAGE_INLINE wide_pair exact_product(wide a, wide b) {
    const wide p = a * b;
    const wide_pair x = halves(a), y = halves(b);
    return {p, ((x.high * y.high - p) + x.high * y.low + x.low * y.high) + x.low * y.low};
}

} // namespace detail

WINDAGE_INLINE wide_pair operator+(wide_pair a, wide_pair b) {
    const wide_pair s = detail::exact_sum(a.high, b.high);
    return detail::ordered_sum(s.high, s.low + (a.low + b.low));
}
WINDAGE_INLINE wide_pair operator-(wide_pair a) { return {-a.high, -a.low}; }
WINDAGE_INLINE wide_pair operator-(wide_pair a, wide_pair b) { return a + -b; }
WINDAGE_INLINE wide_pair operator*(wide_pair a, wide_pair b) {
    const wide_pair p = detail::exact_product(a.high, b.high);
    return detail::ordered_sum(p.high, p.low + (a.high * b.low + a.low * b.high));
}
WINDAGE_INLINE wide_pair operator/(wide_pair a, wide_pair b) {
    const wide q = a.high / b.high;
    const wide_pair left = a - b * wide_pair(q);
    return detail::ordered_sum(q, left.high / b.high);
}
WINDAGE_INLINE wide_pair select(mask<lanes> m, wide_pair a, wide_pair b) {
    return {select(m, a.high, b.high), select(m, a.low, b.low)};
}

/// A number in the digits of the engine.
WINDAGE_INLINE wide rounded(wide_pair a) { return a.high; }
WINDAGE_INLINE wide rounded(wide a) { return a; }

} // namespace windage
