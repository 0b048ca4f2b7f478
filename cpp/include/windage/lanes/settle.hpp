// States that have come to rest, set to zero.
//
// A state that decays for long ends among the subnormal numbers, where an addition takes a hundred times as long, and
// often stays there: 0.99 x rounds back to x. The processor can treat such numbers as zero by itself, but x86 and Arm
// do not agree where they begin (an x86 tells after rounding, an Arm before it), and both would have to be switched on
// in every thread. Here instead a state below 2^-900 (1e-271, less than any quantity in any unit) is compared and set
// to zero, which is the same on every machine. Above it the products of a state with numbers down to 1e-36 stay normal.
#pragma once

#include <cstdint>

#include <windage/lanes/signal.hpp>

namespace windage {

/// States are looked at every so many samples: a slow decay cannot cross from the threshold to the subnormal numbers in
/// between, a quick one crosses them in a few samples. Commands are looked at always, since what is on its way through
/// a delay would wake the states again.
inline constexpr std::int64_t settle_every = 16;

/// What is smaller than 2^-900 as a zero of its sign; undefined numbers stay.
WINDAGE_INLINE wide settled(wide x) { return select(absolute(x) < 0x1p-900, copy_sign(wide(0.0), x), x); }

inline void settle(signal s, std::size_t block_size) {
    for_each_pack(block_size, [&](std::size_t i) WINDAGE_LANE_LOOP { settled(wide::load(s + i)).store(s + i); });
}

} // namespace windage
