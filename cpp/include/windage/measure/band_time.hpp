// Time that a signal spends outside a band, or at and beyond a pair of limits, in steps of the sample period.
#pragma once

#include <windage/measure/measure.hpp>
#include <windage/measure/reducers.hpp>

namespace windage {

class band_time {
public:
    static constexpr int values = 1;
    static constexpr bool stays_undefined = true;

    /// `touching_counts`: a signal at the very limit counts (saturation), or only beyond it (a band).
    band_time(const measure_description& d, bool touching_counts, signal_arena& arena)
        : low_(d.a, arena), high_(d.b, arena), touching_counts_(touching_counts) {}

    void begin_block(const trial_block& block, const window_end&, const target_source&) {
        low_.begin(block);
        high_.begin(block);
    }
    static void begin(wide* v) { v[0] = 0.0; }
    WINDAGE_INLINE void add(wide* v, const sample_point& at, std::size_t i) const {
        const wide low = low_.pack_at(i), high = high_.pack_at(i);
        const auto beyond = (at.x < low) | (at.x > high), touching = (at.x <= low) | (at.x >= high);
        const auto counts = (touching_counts_ ? touching : beyond) & !at.is_outside_after;
        v[0] += select(counts, at.dt, 0.0);
    }
    static wide finish(const wide* v) { return v[0]; }

private:
    lane_value low_, high_;
    bool touching_counts_;
};

} // namespace windage
