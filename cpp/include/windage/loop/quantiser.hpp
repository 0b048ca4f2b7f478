// Rounding to a resolution: the nearest multiple, ties towards plus infinity (a mid-tread quantiser).
#pragma once

#include <windage/lanes/pack.hpp>

namespace windage {

/// x rounded to a multiple of `resolution`; x itself where the resolution is zero.
WINDAGE_INLINE wide quantise(wide x, wide resolution) {
    const auto rounds = resolution > 0.0;
    const wide steps = floor(x / select(rounds, resolution, 1.0) + 0.5);
    return select(rounds, steps * resolution, x);
}

} // namespace windage
