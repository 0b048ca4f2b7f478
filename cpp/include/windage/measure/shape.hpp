// Measures of the shape of a signal: peak to peak, changes of direction, when its peak is.
#pragma once

#include <windage/measure/measure.hpp>
#include <windage/measure/reducers.hpp>

namespace windage {

struct peak_to_peak {
    static constexpr int values = 2; // smallest, largest
    static constexpr bool stays_undefined = true;
    static void begin(wide* v) {
        v[0] = reducers::infinite;
        v[1] = -reducers::infinite;
    }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) {
        v[0] = minimum(v[0], at.x);
        v[1] = maximum(v[1], at.x);
    }
    static wide finish(const wide* v) { return v[1] - v[0]; }
};

/// How often a signal turns round. It does once it has come back from its last extreme by more than the dead band a, so
/// that noise within the band does not count; its first direction is no turn.
class reversals {
public:
    static constexpr int values = 4; // last maximum, last minimum, direction (0 while none is known), turns
    static constexpr bool stays_undefined = false;

    reversals(const measure_description& d, signal_arena& arena) : dead_band_(d.a, arena) {}

    void begin_block(const trial_block& block, const window_end&, const target_source&) { dead_band_.begin(block); }
    static void begin(wide* v) {
        for (int k = 0; k < values; ++k) v[k] = 0.0;
    }
    WINDAGE_INLINE void add(wide* v, const sample_point& at, std::size_t i) const {
        const wide band = dead_band_.pack_at(i), direction = v[2];
        const wide high = select(at.is_first, at.x, maximum(v[0], at.x));
        const wide low = select(at.is_first, at.x, minimum(v[1], at.x));
        const auto falls = (high - at.x > band) & (direction >= 0.0), rises = (at.x - low > band) & (direction <= 0.0);
        v[0] = select(rises, at.x, high);
        v[1] = select(falls, at.x, low);
        v[2] = select(falls, -1.0, select(rises, 1.0, direction));
        v[3] += as_number((falls | rises) & (direction != 0.0));
    }
    static wide finish(const wide* v) { return v[3]; }

private:
    lane_value dead_band_;
};

struct time_of_peak {
    static constexpr int values = 2; // largest magnitude, when it was met first
    static constexpr bool stays_undefined = false;
    static void begin(wide* v) {
        v[0] = -1.0;
        v[1] = 0.0;
    }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) {
        const auto is_larger = absolute(at.x) > v[0];
        v[0] = select(is_larger, absolute(at.x), v[0]);
        v[1] = select(is_larger, at.t, v[1]);
    }
    static wide finish(const wide* v) { return v[1]; }
};

} // namespace windage
