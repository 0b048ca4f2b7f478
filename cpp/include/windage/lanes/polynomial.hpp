// Polynomials over packs and the bit moves that the elementary functions share.
//
// Guarantee: the order of the operations follows from the number of coefficients alone, hence the same bits for every
// W, compiler and instruction set. Only + and * on numbers; shifts, sums and bitwise operations on bits.
#pragma once

#include <cstddef>
#include <cstdint>

#include <windage/lanes/pack.hpp>

namespace windage::detail {

/// x^1, x^2, x^4, x^8, x^16 as far as a polynomial needs them.
template <int W> struct squarings {
    pack<W> power[5];
};

template <std::size_t First, std::size_t Count, int W, std::size_t N>
WINDAGE_INLINE pack<W> polynomial_section(const squarings<W>& x, const double (&coefficient)[N]) {
    if constexpr (Count == 1) {
        return pack<W>(coefficient[First]);
    } else {
        constexpr std::size_t level = Count > 16 ? 4 : Count > 8 ? 3 : Count > 4 ? 2 : Count > 2 ? 1 : 0;
        constexpr std::size_t low = std::size_t(1) << level;
        return polynomial_section<First, low>(x, coefficient) +
               x.power[level] * polynomial_section<First + low, Count - low>(x, coefficient);
    }
}

/// coefficient[0] + coefficient[1] x + ... by Estrin's scheme (G. Estrin, 1960): halves are evaluated side by side, so
/// that the chain of dependent operations has length 2 log2(N) instead of 2 N.
template <int W, std::size_t N> WINDAGE_INLINE pack<W> polynomial(pack<W> x, const double (&coefficient)[N]) {
    static_assert(N >= 2 && N <= 32);
    squarings<W> powers;
    powers.power[0] = x;
    if constexpr (N > 2) powers.power[1] = x * x;
    if constexpr (N > 4) powers.power[2] = powers.power[1] * powers.power[1];
    if constexpr (N > 8) powers.power[3] = powers.power[2] * powers.power[2];
    if constexpr (N > 16) powers.power[4] = powers.power[3] * powers.power[3];
    return polynomial_section<0, N>(powers, coefficient);
}

/// Adding 1.5 * 2^52 to k (|k| < 2^51) leaves k in the lowest bits: 5 gives 0x4338000000000005, -1 0x4337ffffffffffff.
inline constexpr double integer_shifter = 0x1.8p52;
inline constexpr std::int64_t integer_shifter_bits = 0x4338000000000000;
inline constexpr std::int64_t sign_bit = std::int64_t(0x8000000000000000ull);

inline constexpr double infinity = __builtin_inf();
inline constexpr double undefined = __builtin_nan("");

/// Registers seen as unsigned: sums of bit patterns wrap around, which signed integers may not.
template <int W> struct bit_registers {
    typedef std::uint64_t type __attribute__((vector_size(8 * pack_layout<W>::register_width)));
};
template <int W> WINDAGE_INLINE integer_pack<W> add_bits(integer_pack<W> a, integer_pack<W> b) {
    using bits = typename bit_registers<W>::type;
    for (int i = 0; i < pack_layout<W>::registers; ++i)
        a.part[i] = (typename pack_layout<W>::integer)((bits)a.part[i] + (bits)b.part[i]);
    return a;
}
template <int W> WINDAGE_INLINE integer_pack<W> subtract_bits(integer_pack<W> a, integer_pack<W> b) {
    using bits = typename bit_registers<W>::type;
    for (int i = 0; i < pack_layout<W>::registers; ++i)
        a.part[i] = (typename pack_layout<W>::integer)((bits)a.part[i] - (bits)b.part[i]);
    return a;
}
/// Shift to the right with zeros coming in (the sign-keeping shift of 64 bits is missing before AVX-512).
template <int W> WINDAGE_INLINE integer_pack<W> shift_right(integer_pack<W> a, int count) {
    using bits = typename bit_registers<W>::type;
    for (auto& p : a.part) p = (typename pack_layout<W>::integer)((bits)p >> count);
    return a;
}
template <int W> WINDAGE_INLINE integer_pack<W> shift_left(integer_pack<W> a, int count) {
    using bits = typename bit_registers<W>::type;
    for (auto& p : a.part) p = (typename pack_layout<W>::integer)((bits)p << count);
    return a;
}

/// x * 2^k where k sits in the low bits of `shifted` = k + integer_shifter; x and the result must be normal numbers.
/// Adding k to the exponent field: 1.5 = 0x3ff8..., k = 2 adds 0x0020..., giving 0x4018... = 6.
template <int W> WINDAGE_INLINE pack<W> scale_normal(pack<W> x, pack<W> shifted) {
    return from_bits(add_bits(bits_of(x), shift_left(bits_of(shifted), 52)));
}

/// All bits set in the lanes whose lowest bit is set.
template <int W> WINDAGE_INLINE mask<W> lowest_bit(integer_pack<W> a) { return {integer_pack<W>(0) - (a & 1)}; }

/// The sign bit flipped where it is set in `sign`.
template <int W> WINDAGE_INLINE pack<W> flip_sign(pack<W> x, integer_pack<W> sign) {
    return from_bits(bits_of(x) ^ (sign & sign_bit));
}

/// x with the 27 lowest mantissa bits cleared: the product of two such numbers is exact (T. J. Dekker, 1971).
template <int W> WINDAGE_INLINE pack<W> upper_half(pack<W> x) {
    return from_bits(bits_of(x) & std::int64_t(0xfffffffff8000000ull));
}

} // namespace windage::detail
