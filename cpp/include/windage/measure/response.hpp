// Measures of a response, after IEC 60050-351:2013: overshoot (351-45-38), step response time and rise time
// (351-45-36), settling time (351-45-37). The change is taken from the output at the first sample of the window to the
// reference at its last one (target_source); crossings are interpolated between samples.
#pragma once

#include <windage/measure/measure.hpp>
#include <windage/measure/reducers.hpp>

namespace windage {

/// Where the response starts and where it should end.
class response_span {
public:
    explicit response_span(signal_arena& arena) : final_(arena.take()) {}
    void begin_block(const window_end& end, const target_source& targets) { targets.target(end, final_); }
    wide final_value(std::size_t i) const { return wide::load(final_ + i); }

private:
    signal final_;
};

/// Largest excess over the final value (or, turned round, below the initial value) as a fraction of the change.
class excursion {
public:
    static constexpr int values = 2; // initial value, largest excess
    static constexpr bool stays_undefined = false;

    excursion(bool below_initial, signal_arena& arena) : span_(arena), below_initial_(below_initial) {}

    void begin_block(const trial_block&, const window_end& end, const target_source& targets) {
        span_.begin_block(end, targets);
    }
    static void begin(wide* v) { v[0] = v[1] = 0.0; }
    WINDAGE_INLINE void add(wide* v, const sample_point& at, std::size_t i) const {
        v[0] = select(at.is_first, at.x, v[0]);
        const wide change = span_.final_value(i) - v[0];
        const wide excess = below_initial_ ? v[0] - at.x : at.x - span_.final_value(i);
        v[1] = maximum(v[1], copy_sign(wide(1.0), change) * excess);
    }
    /// Infinite where there is no change to compare with.
    wide finish(const wide* v, std::size_t i, wide) const {
        const wide change = absolute(span_.final_value(i) - v[0]);
        return select(change > 0.0, v[1] / change, reducers::infinite);
    }

private:
    response_span span_;
    bool below_initial_;
};

/// Time from the first crossing of fraction `a` of the change to the first crossing of fraction `b`.
class rise_time {
public:
    static constexpr int values = 5; // initial value, crossing of a, crossing of b, last fraction, last time
    static constexpr bool stays_undefined = false;

    rise_time(const measure_description& d, signal_arena& arena) : span_(arena), a_(d.a, arena), b_(d.b, arena) {}

    void begin_block(const trial_block& block, const window_end& end, const target_source& targets) {
        span_.begin_block(end, targets);
        a_.begin(block);
        b_.begin(block);
    }
    static void begin(wide* v) {
        v[0] = v[3] = v[4] = 0.0;
        v[1] = v[2] = reducers::infinite;
    }
    WINDAGE_INLINE void add(wide* v, const sample_point& at, std::size_t i) const {
        v[0] = select(at.is_first, at.x, v[0]);
        const wide fraction = (at.x - v[0]) / (span_.final_value(i) - v[0]);
        v[1] = first_crossing(v[1], a_.pack_at(i), v, fraction, at.t);
        v[2] = first_crossing(v[2], b_.pack_at(i), v, fraction, at.t);
        v[3] = fraction;
        v[4] = at.t;
    }
    /// Infinite where there is no change: any move, however small, would cross all its fractions at once.
    wide finish(const wide* v, std::size_t i, wide) const {
        const wide time = v[2] - select(v[1] < reducers::infinite, v[1], 0.0);
        return select(absolute(span_.final_value(i) - v[0]) > 0.0, time, reducers::infinite);
    }

private:
    static wide first_crossing(wide known, wide level, const wide* v, wide fraction, wide t) {
        const auto crosses = (known == reducers::infinite) & (fraction >= level);
        const wide between = (level - v[3]) / (fraction - v[3]);
        const wide instant = v[4] + (t - v[4]) * select((between >= 0.0) & (between <= 1.0), between, 1.0);
        return select(crosses, instant, known);
    }

    response_span span_;
    lane_value a_, b_;
};

/// Time from the window's start until the deviation stays within the band; infinite if it is outside at the end.
class settling_time {
public:
    static constexpr int values = 4; // initial value, settled since, last signed deviation, last time
    static constexpr bool stays_undefined = false;

    /// `relative`: the deviation is from the reference at the window's end, and the band a fraction of the change;
    /// otherwise the deviation is the signal itself and the band in its unit.
    settling_time(const measure_description& d, bool relative, signal_arena& arena)
        : span_(arena), band_(d.a, arena), relative_(relative) {}

    void begin_block(const trial_block& block, const window_end& end, const target_source& targets) {
        span_.begin_block(end, targets);
        band_.begin(block);
    }
    static void begin(wide* v) {
        for (int k = 0; k < values; ++k) v[k] = 0.0;
    }
    WINDAGE_INLINE void add(wide* v, const sample_point& at, std::size_t i) const {
        v[0] = select(at.is_first, at.x, v[0]);
        const wide target = relative_ ? span_.final_value(i) : wide(0.0);
        const wide band = relative_ ? band_.pack_at(i) * absolute(target - v[0]) : band_.pack_at(i);
        const wide deviation = at.x - target;
        const auto outside = !(absolute(deviation) <= band), was_outside = v[1] == reducers::infinite;
        const wide instant = v[3] + (at.t - v[3]) * ((absolute(v[2]) - band) / absolute(v[2] - deviation));
        v[1] = select(outside, wide(reducers::infinite), select(was_outside, instant, v[1]));
        v[2] = deviation;
        v[3] = at.t;
    }
    static wide finish(const wide* v) { return v[1]; }

private:
    response_span span_;
    lane_value band_;
    bool relative_;
};

} // namespace windage
