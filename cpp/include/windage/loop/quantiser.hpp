// Rounding to a resolution: the nearest multiple, ties towards plus infinity (a mid-tread quantiser).
#pragma once

#include <windage/lanes/pack.hpp>

namespace windage {

/// x rounded to a multiple of `resolution`; x itself where the resolution is zero, or finer than the digits of x.
WINDAGE_INLINE wide quantise(wide x, wide resolution) {
    const wide steps = x / select(resolution > 0.0, resolution, 1.0);
    const auto rounds = (resolution > 0.0) & (absolute(steps) < 0x1p52);
    return select(rounds, floor(steps + 0.5) * resolution, x);
}

/// The same for an x that is limited already: x itself at a limit, and no multiple beyond one.
WINDAGE_INLINE wide quantise_within(wide x, wide resolution, wide low, wide high) {
    const auto is_between = (x > low) & (x < high);
    return select(is_between, clip(quantise(x, resolution), low, high), x);
}

} // namespace windage
