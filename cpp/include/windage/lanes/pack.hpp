// Pack: W doubles that move through the same arithmetic together.
//
// Guarantee: every operation rounds exactly as the scalar operation does, so lane i of a result depends on lane i of
// the operands alone and has the same bits for every W and every instruction set. This holds because only + - * / and
// the square root are used (IEEE 754-2019, correctly rounded) and because the build forbids contraction.
// Comparisons give lane masks; `select` takes the place of branches.
//
// A pack is an array of hardware registers and every operation a loop over them: a single vector type wider than the
// registers would be simpler, but g++ 12 turns its comparisons and selections into scalar code (measured).
#pragma once

#include <algorithm>
#include <cstdint>
#include <type_traits>

#if defined(__SSE2__)
#include <immintrin.h>
#elif defined(__ARM_NEON)
#include <arm_neon.h>
#endif

#define WINDAGE_INLINE inline __attribute__((always_inline))
/// On the lambda of a lane loop: g++ would otherwise call it once a pack.
#define WINDAGE_LANE_LOOP __attribute__((always_inline))

namespace windage {

/// Doubles in one hardware register of this build.
#if defined(__AVX512F__)
inline constexpr int register_lanes = 8;
#elif defined(__AVX__)
inline constexpr int register_lanes = 4;
#else
inline constexpr int register_lanes = 2;
#endif

/// Doubles in the pack that the engine computes with; measured per instruction set (benchmarks/README.md).
#ifdef WINDAGE_LANES
inline constexpr int lanes = WINDAGE_LANES;
#else
inline constexpr int lanes = 2 * register_lanes;
#endif

namespace detail {
template <int N> struct register_types {
    typedef double real __attribute__((vector_size(8 * N)));
    typedef std::int64_t integer __attribute__((vector_size(8 * N)));
    /// The same register as it lies in memory, at any multiple of eight bytes. It may be read where doubles were
    /// written since a vector shares the alias class of its element; with `may_alias` every store of a pack would make
    /// the compiler read all pointers again.
    typedef double stored __attribute__((vector_size(8 * N), aligned(8)));
};

template <class Real> WINDAGE_INLINE Real register_square_root(Real x) {
#if defined(__AVX512F__)
    if constexpr (sizeof(Real) == 64) return (Real)_mm512_maskz_sqrt_pd(0xff, (__m512d)x);
#endif
#if defined(__AVX__)
    if constexpr (sizeof(Real) == 32) return (Real)_mm256_sqrt_pd((__m256d)x);
#endif
#if defined(__SSE2__)
    if constexpr (sizeof(Real) == 16) return (Real)_mm_sqrt_pd((__m128d)x);
#elif defined(__ARM_NEON)
    if constexpr (sizeof(Real) == 16) return (Real)vsqrtq_f64((float64x2_t)x);
#endif
    for (unsigned i = 0; i < sizeof(Real) / 8; ++i) x[i] = __builtin_sqrt(x[i]);
    return x;
}
} // namespace detail

/// The registers that hold W lanes of a kind of element.
template <int W> struct pack_layout {
    static constexpr int width = W;
    static constexpr int register_width = std::min(W, register_lanes);
    static constexpr int registers = W / register_width;
    static_assert(W % register_width == 0, "a pack fills whole registers");
    using real = typename detail::register_types<register_width>::real;
    using integer = typename detail::register_types<register_width>::integer;
    using stored = typename detail::register_types<register_width>::stored;
};

/// W 64-bit integers; the raw bits of a pack, or lane masks (all bits set where true).
template <int W> struct integer_pack : pack_layout<W> {
    using layout = pack_layout<W>;
    typename layout::integer part[layout::registers];

    integer_pack() = default;
    WINDAGE_INLINE integer_pack(std::int64_t scalar) {
        for (auto& p : part) p = scalar - typename layout::integer{};
    }
    WINDAGE_INLINE std::int64_t operator[](int lane) const {
        return part[lane / layout::register_width][lane % layout::register_width];
    }
};

template <int W> struct pack : pack_layout<W> {
    using layout = pack_layout<W>;
    typename layout::real part[layout::registers];

    pack() = default;
    /// The same number in every lane (x - 0 keeps the sign of a negative zero, x + 0 would not).
    WINDAGE_INLINE pack(double scalar) {
        for (auto& p : part) p = scalar - typename layout::real{};
    }

    // Register by register: a copy of the whole array would go through the stack (g++ 12, measured).
    static WINDAGE_INLINE pack load(const double* from) {
        pack x;
        for (int i = 0; i < layout::registers; ++i)
            x.part[i] = *reinterpret_cast<const typename layout::stored*>(from + i * layout::register_width);
        return x;
    }
    WINDAGE_INLINE void store(double* to) const {
        for (int i = 0; i < layout::registers; ++i)
            *reinterpret_cast<typename layout::stored*>(to + i * layout::register_width) = part[i];
    }

    WINDAGE_INLINE double operator[](int lane) const {
        return part[lane / layout::register_width][lane % layout::register_width];
    }
    WINDAGE_INLINE void set(int lane, double x) {
        part[lane / layout::register_width][lane % layout::register_width] = x;
    }
};

/// The pack of this build.
using wide = pack<lanes>;

#define WINDAGE_BINARY(TYPE, OPERATOR)                                                                                 \
    template <int W> WINDAGE_INLINE TYPE<W> operator OPERATOR(TYPE<W> a, TYPE<W> b) {                                  \
        for (int i = 0; i < TYPE<W>::registers; ++i) a.part[i] = a.part[i] OPERATOR b.part[i];                         \
        return a;                                                                                                      \
    }                                                                                                                  \
    template <int W, class S> WINDAGE_INLINE auto operator OPERATOR(TYPE<W> a, S b)                                    \
        requires std::is_arithmetic_v<S>                                                                               \
    {                                                                                                                  \
        return a OPERATOR TYPE<W>(b);                                                                                  \
    }                                                                                                                  \
    template <int W, class S> WINDAGE_INLINE auto operator OPERATOR(S a, TYPE<W> b)                                    \
        requires std::is_arithmetic_v<S>                                                                               \
    {                                                                                                                  \
        return TYPE<W>(a) OPERATOR b;                                                                                  \
    }
WINDAGE_BINARY(pack, +)
WINDAGE_BINARY(pack, -)
WINDAGE_BINARY(pack, *)
WINDAGE_BINARY(pack, /)
WINDAGE_BINARY(integer_pack, +)
WINDAGE_BINARY(integer_pack, -)
WINDAGE_BINARY(integer_pack, &)
WINDAGE_BINARY(integer_pack, |)
WINDAGE_BINARY(integer_pack, ^)
WINDAGE_BINARY(integer_pack, <<)
WINDAGE_BINARY(integer_pack, >>)
#undef WINDAGE_BINARY

template <int W> WINDAGE_INLINE pack<W> operator-(pack<W> a) {
    for (auto& p : a.part) p = -p;
    return a;
}
template <int W> WINDAGE_INLINE pack<W>& operator+=(pack<W>& a, pack<W> b) { return a = a + b; }
template <int W> WINDAGE_INLINE pack<W>& operator-=(pack<W>& a, pack<W> b) { return a = a - b; }
template <int W> WINDAGE_INLINE pack<W>& operator*=(pack<W>& a, pack<W> b) { return a = a * b; }

/// Lane-wise truth values.
template <int W> struct mask {
    integer_pack<W> bits;

    friend WINDAGE_INLINE mask operator&(mask a, mask b) { return {a.bits & b.bits}; }
    friend WINDAGE_INLINE mask operator|(mask a, mask b) { return {a.bits | b.bits}; }
    friend WINDAGE_INLINE mask operator!(mask a) { return {a.bits ^ std::int64_t(-1)}; }
    WINDAGE_INLINE bool operator[](int lane) const { return bits[lane] != 0; }
};

#define WINDAGE_COMPARISON(OPERATOR)                                                                                   \
    template <int W> WINDAGE_INLINE mask<W> operator OPERATOR(pack<W> a, pack<W> b) {                                  \
        mask<W> m;                                                                                                     \
        for (int i = 0; i < pack<W>::registers; ++i)                                                                   \
            m.bits.part[i] = (typename pack_layout<W>::integer)(a.part[i] OPERATOR b.part[i]);                         \
        return m;                                                                                                      \
    }                                                                                                                  \
    template <int W> WINDAGE_INLINE mask<W> operator OPERATOR(pack<W> a, double b) { return a OPERATOR pack<W>(b); }
WINDAGE_COMPARISON(<)
WINDAGE_COMPARISON(<=)
WINDAGE_COMPARISON(>)
WINDAGE_COMPARISON(>=)
WINDAGE_COMPARISON(==)
WINDAGE_COMPARISON(!=)
#undef WINDAGE_COMPARISON

/// a where the mask is true, else b. Both are evaluated.
template <int W> WINDAGE_INLINE pack<W> select(mask<W> m, pack<W> a, pack<W> b) {
    for (int i = 0; i < pack<W>::registers; ++i) a.part[i] = m.bits.part[i] ? a.part[i] : b.part[i];
    return a;
}
template <int W> WINDAGE_INLINE pack<W> select(mask<W> m, double a, pack<W> b) { return select(m, pack<W>(a), b); }
template <int W> WINDAGE_INLINE pack<W> select(mask<W> m, pack<W> a, double b) { return select(m, a, pack<W>(b)); }
template <int W> WINDAGE_INLINE pack<W> select(mask<W> m, double a, double b) {
    return select(m, pack<W>(a), pack<W>(b));
}

template <int W> WINDAGE_INLINE bool any(mask<W> m) {
    typename pack_layout<W>::integer gathered{};
    for (auto p : m.bits.part) gathered |= p;
    std::int64_t found = 0;
    for (int i = 0; i < pack_layout<W>::register_width; ++i) found |= gathered[i];
    return found != 0;
}
template <int W> WINDAGE_INLINE bool all(mask<W> m) { return !any(!m); }

template <int W> WINDAGE_INLINE integer_pack<W> bits_of(pack<W> x) {
    integer_pack<W> bits;
    for (int i = 0; i < pack<W>::registers; ++i) bits.part[i] = (typename pack_layout<W>::integer)x.part[i];
    return bits;
}
template <int W> WINDAGE_INLINE pack<W> from_bits(integer_pack<W> bits) {
    pack<W> x;
    for (int i = 0; i < pack<W>::registers; ++i) x.part[i] = (typename pack_layout<W>::real)bits.part[i];
    return x;
}

/// 1 where true, 0 where false.
template <int W> WINDAGE_INLINE pack<W> as_number(mask<W> m) { return from_bits(m.bits & bits_of(pack<W>(1.0))); }

/// Smaller of the two; an undefined number in the first argument passes through, one in the second is dropped.
template <int W> WINDAGE_INLINE pack<W> minimum(pack<W> a, pack<W> b) { return select(b < a, b, a); }
/// Larger of the two; undefined numbers as in `minimum`.
template <int W> WINDAGE_INLINE pack<W> maximum(pack<W> a, pack<W> b) { return select(b > a, b, a); }
/// Clip to [low, high]; an undefined x stays undefined, so that a limit never hides a diverged trial.
template <int W> WINDAGE_INLINE pack<W> clip(pack<W> x, pack<W> low, pack<W> high) {
    return minimum(maximum(x, low), high);
}

template <int W> WINDAGE_INLINE pack<W> absolute(pack<W> x) {
    return from_bits(bits_of(x) & std::int64_t(0x7fffffffffffffff));
}
/// The magnitude of the first with the sign bit of the second.
template <int W> WINDAGE_INLINE pack<W> copy_sign(pack<W> magnitude, pack<W> sign) {
    const auto sign_bit = std::int64_t(0x8000000000000000ull);
    return from_bits((bits_of(magnitude) & ~sign_bit) | (bits_of(sign) & sign_bit));
}
/// -1, 0 or 1; undefined stays undefined.
template <int W> WINDAGE_INLINE pack<W> sign(pack<W> x) { return select(x > 0.0, 1.0, select(x < 0.0, -1.0, x)); }

/// Nearest integer, ties to even, for |x| < 2^51: adding 1.5 * 2^52 leaves no fraction bits.
template <int W> WINDAGE_INLINE pack<W> round_small(pack<W> x) { return (x + 0x1.8p52) - 0x1.8p52; }
/// Largest integer not above x, for every x.
template <int W> WINDAGE_INLINE pack<W> floor(pack<W> x) {
    const pack<W> nearest = copy_sign((absolute(x) + 0x1p52) - 0x1p52, x);
    const pack<W> lowered = select(nearest > x, nearest - 1.0, nearest);
    return select(absolute(x) < 0x1p52, lowered, x);
}

/// True where x is neither infinite nor undefined.
template <int W> WINDAGE_INLINE mask<W> is_finite(pack<W> x) { return (x - x) == 0.0; }

/// By the hardware instruction, correctly rounded.
template <int W> WINDAGE_INLINE pack<W> square_root(pack<W> x) {
    for (auto& p : x.part) p = detail::register_square_root(p);
    return x;
}

} // namespace windage
