// Random numbers as a function of (seed, stream, draw, trial): no generator state, so that any draw of any trial can be
// made alone, in any order, with the same bits.
//
// Philox4x32-10: J. K. Salmon, M. A. Moraes, R. O. Dror, D. E. Shaw, Parallel random numbers: as easy as 1, 2, 3, SC11.
// Counter words: trial (low 32 bits), trial (high 32 bits), stream, draw; key words: seed (low), seed (high).
// Guarantee: distinct (seed, stream, draw, trial) use distinct counters or keys. Not meant for secrets.
#pragma once

#include <array>
#include <cstdint>
#include <cstring>

#include <windage/lanes/exponential.hpp>
#include <windage/lanes/pack.hpp>
#include <windage/lanes/polynomial.hpp>
#include <windage/lanes/trigonometric.hpp>

namespace windage {

/// Where a sequence of draws comes from: the seed of the study and the number of the random quantity.
struct stream_key {
    std::uint64_t seed;
    std::uint32_t stream;
};

using philox_counter = std::array<std::uint32_t, 4>;
using philox_key = std::array<std::uint32_t, 2>;

namespace detail {
inline constexpr std::uint32_t philox_multiplier_0 = 0xD2511F53u, philox_multiplier_1 = 0xCD9E8D57u;
inline constexpr std::uint32_t philox_weyl_0 = 0x9E3779B9u, philox_weyl_1 = 0xBB67AE85u;
inline constexpr int philox_rounds = 10;
inline constexpr std::int64_t low_word = 0xffffffff;

/// Product of the low 32 bits of each lane and of `factor`; the high 32 bits of the lanes are ignored.
template <class Integer> WINDAGE_INLINE Integer multiply_low_words(Integer a, std::uint32_t factor) {
#if defined(__AVX512F__)
    if constexpr (sizeof(Integer) == 64) {
        // The masked form: the plain one of g++ 12 warns of an uninitialised operand inside its own header.
        return (Integer)_mm512_maskz_mul_epu32(0xff, (__m512i)a, _mm512_set1_epi64(factor));
    }
#endif
#if defined(__AVX2__)
    if constexpr (sizeof(Integer) == 32) return (Integer)_mm256_mul_epu32((__m256i)a, _mm256_set1_epi64x(factor));
#endif
#if defined(__SSE2__)
    if constexpr (sizeof(Integer) == 16) return (Integer)_mm_mul_epu32((__m128i)a, _mm_set1_epi64x(factor));
#elif defined(__ARM_NEON)
    if constexpr (sizeof(Integer) == 16) return (Integer)vmull_n_u32(vmovn_u64((uint64x2_t)a), factor);
#endif
    for (unsigned i = 0; i < sizeof(Integer) / 8; ++i)
        a[i] = std::int64_t((std::uint64_t(a[i]) & 0xffffffffu) * factor);
    return a;
}

template <int W> WINDAGE_INLINE integer_pack<W> multiply_low_words(integer_pack<W> a, std::uint32_t factor) {
    for (auto& p : a.part) p = multiply_low_words(p, factor);
    return a;
}

/// The high 32 bits of each lane in the low half; what the high half holds afterwards does not matter. On x86 by a
/// shuffle, because shifts and products compete for the same execution ports (5 to 10 % faster, measured).
template <class Integer> WINDAGE_INLINE Integer high_words(Integer a) {
#if defined(__AVX512F__)
    if constexpr (sizeof(Integer) == 64) return (Integer)_mm512_maskz_shuffle_epi32(0xffff, (__m512i)a, _MM_PERM_DDBB);
#endif
#if defined(__AVX2__)
    if constexpr (sizeof(Integer) == 32) return (Integer)_mm256_shuffle_epi32((__m256i)a, 0xf5);
#endif
#if defined(__SSE2__)
    if constexpr (sizeof(Integer) == 16) return (Integer)_mm_shuffle_epi32((__m128i)a, 0xf5);
#endif
    return a >> 32;
}

template <int W> WINDAGE_INLINE integer_pack<W> high_words(integer_pack<W> a) {
    for (auto& p : a.part) p = high_words(p);
    return a;
}

/// Four 32-bit words a lane, each in the low half of 64 bits; what the high halves hold does not matter.
template <int W> struct philox_words {
    integer_pack<W> word[4];
};

template <int W> WINDAGE_INLINE philox_words<W> philox_lanes(philox_words<W> c, philox_key key) {
    for (int round = 0; round < philox_rounds; ++round) {
        const integer_pack<W> first = multiply_low_words(c.word[0], philox_multiplier_0);
        const integer_pack<W> second = multiply_low_words(c.word[2], philox_multiplier_1);
        c.word[0] = high_words(second) ^ c.word[1] ^ std::int64_t(key[0]);
        c.word[2] = high_words(first) ^ c.word[3] ^ std::int64_t(key[1]);
        c.word[1] = second;
        c.word[3] = first;
        key[0] += philox_weyl_0;
        key[1] += philox_weyl_1;
    }
    return c;
}

/// (n + 1/2) 2^-52 with n the upper 52 bits of (high word, low word): n is put behind the exponent of 1, which gives
/// 1 + n 2^-52; taking 1 - 2^-53 away is exact.
template <int W> WINDAGE_INLINE pack<W> open_uniform(integer_pack<W> low, integer_pack<W> high) {
    const integer_pack<W> word = shift_left(high, 32) | (low & low_word);
    return from_bits(shift_right(word, 12) | bits_of(pack<W>(1.0))) - (1.0 - 0x1p-53);
}

template <int W> WINDAGE_INLINE integer_pack<W> load_integers(const std::uint64_t* from) {
    using layout = pack_layout<W>;
    integer_pack<W> x;
    for (int i = 0; i < layout::registers; ++i)
        std::memcpy(&x.part[i], from + i * layout::register_width, sizeof(x.part[i]));
    return x;
}

/// first, first + 1, ... in the lanes.
template <int W> WINDAGE_INLINE integer_pack<W> consecutive(std::uint64_t first) {
    using layout = pack_layout<W>;
    integer_pack<W> x;
    for (int i = 0; i < layout::registers; ++i) {
        typename layout::integer step;
        for (int lane = 0; lane < layout::register_width; ++lane) step[lane] = i * layout::register_width + lane;
        x.part[i] = step;
    }
    return add_bits(x, integer_pack<W>(std::int64_t(first)));
}

template <int W>
WINDAGE_INLINE void uniform_pair(integer_pack<W> trial, stream_key key, std::uint32_t draw, pack<W>& a, pack<W>& b) {
    const philox_words<W> counter{{trial, shift_right(trial, 32), std::int64_t(key.stream), std::int64_t(draw)}};
    const philox_words<W> random =
        philox_lanes(counter, philox_key{std::uint32_t(key.seed), std::uint32_t(key.seed >> 32)});
    a = open_uniform(random.word[0], random.word[1]);
    b = open_uniform(random.word[2], random.word[3]);
}

/// G. E. P. Box, M. E. Muller, A note on the generation of random normal deviates, Ann. Math. Stat. 29 (1958) 610.
template <int W>
WINDAGE_INLINE void normal_pair(integer_pack<W> trial, stream_key key, std::uint32_t draw, pack<W>& a, pack<W>& b) {
    pack<W> u, turn;
    uniform_pair(trial, key, draw, u, turn);
    const pack<W> radius = square_root(-2.0 * logarithm_normal(u));
    const auto direction = sine_cosine_turn(turn);
    a = radius * direction.cosine;
    b = radius * direction.sine;
}
} // namespace detail

/// The generator itself: four random words from a counter and a key.
inline philox_counter philox4x32_10(philox_counter c, philox_key key) {
    for (int round = 0; round < detail::philox_rounds; ++round) {
        const std::uint64_t first = std::uint64_t(detail::philox_multiplier_0) * c[0];
        const std::uint64_t second = std::uint64_t(detail::philox_multiplier_1) * c[2];
        c = {std::uint32_t(second >> 32) ^ c[1] ^ key[0], std::uint32_t(second),
             std::uint32_t(first >> 32) ^ c[3] ^ key[1], std::uint32_t(first)};
        key[0] += detail::philox_weyl_0;
        key[1] += detail::philox_weyl_1;
    }
    return c;
}

/// Two independent uniforms in the open interval (0, 1), 52 bits each; lane i belongs to trial first_trial + i.
template <int W> WINDAGE_INLINE void uniform_pair(std::uint64_t first_trial, stream_key key, std::uint32_t draw,
                                                  pack<W>& a, pack<W>& b) {
    detail::uniform_pair(detail::consecutive<W>(first_trial), key, draw, a, b);
}
/// The same for W trials given by their numbers.
template <int W> WINDAGE_INLINE void uniform_pair(const std::uint64_t* trials, stream_key key, std::uint32_t draw,
                                                  pack<W>& a, pack<W>& b) {
    detail::uniform_pair(detail::load_integers<W>(trials), key, draw, a, b);
}

/// Two independent standard normal numbers from the uniforms of the same (key, draw, trial); at most 8.58 in size.
template <int W>
WINDAGE_INLINE void normal_pair(std::uint64_t first_trial, stream_key key, std::uint32_t draw, pack<W>& a, pack<W>& b) {
    detail::normal_pair(detail::consecutive<W>(first_trial), key, draw, a, b);
}
/// The same for W trials given by their numbers.
template <int W> WINDAGE_INLINE void normal_pair(const std::uint64_t* trials, stream_key key, std::uint32_t draw,
                                                 pack<W>& a, pack<W>& b) {
    detail::normal_pair(detail::load_integers<W>(trials), key, draw, a, b);
}

} // namespace windage
