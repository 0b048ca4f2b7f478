// The loop that every measure shares: which lanes are inside the window, and the running values of each pack.
#pragma once

#include <cstdint>

#include <windage/measure/reducers.hpp>
#include <windage/measure/window.hpp>

namespace windage {

/// `Reducer` may hold lane values of its own; it is told of each block by `begin_block`. `Reducer::stays_undefined`:
/// once its first running value is undefined, no sample makes it a number again.
template <class Reducer> class reduction final : public measure {
public:
    reduction(const measure_description& d, constant_signal values, const measure_timing& timing, signal_arena& arena,
              Reducer reducer = {})
        : values_(values), period_(timing.period), size_(arena.block_size()), window_(d, timing, arena),
          reducer_(std::move(reducer)), running_(arena.take(Reducer::values)), seen_(arena.take()) {}

    void begin(const trial_block& block, const target_source& targets) override {
        window_.begin(block);
        samples_ = 0;
        if constexpr (requires { reducer_.begin_block(block, window_.end(), targets); })
            reducer_.begin_block(block, window_.end(), targets);
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            wide v[Reducer::values];
            reducer_.begin(v);
            for (int k = 0; k < Reducer::values; ++k) v[k].store(running_ + k * size_ + i);
            wide(0.0).store(seen_ + i);
        });
    }

    void update(constant_signal time) override {
        if (!window_.is_uniform())
            for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
                add<true>(instant_at(wide::load(time + i), i, wide::load(seen_ + i)), i);
            });
        else if (window_.uniformly_inside(time)) {
            // The instant is the same for all lanes and read once, since loads are what a pass waits for.
            const instant now = instant_at(wide(time[0]), 0, wide(double(samples_)));
            for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP { add<false>(now, i); });
            ++samples_;
        }
    }

    /// A window that holds no sample leaves the measure undefined.
    void finish(signal result) const override {
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            wide v[Reducer::values];
            for (int k = 0; k < Reducer::values; ++k) v[k] = wide::load(running_ + k * size_ + i);
            wide value;
            if constexpr (requires { reducer_.finish(v, i, window_.start(i)); })
                value = reducer_.finish(v, i, window_.start(i));
            else
                value = reducer_.finish(v);
            const wide seen = counts_together() ? wide(double(samples_)) : wide::load(seen_ + i);
            select(seen > 0.0, value, std::numeric_limits<double>::quiet_NaN()).store(result + i);
        });
    }

private:
    bool counts_together() const { return Reducer::stays_undefined && window_.is_uniform(); }

    /// What a sample is to the window.
    struct instant {
        wide t, dt, start;
        mask<lanes> is_first, is_last, is_outside_after;
    };
    instant instant_at(wide t, std::size_t i, wide seen) const {
        const wide dt = period_.pack_at(i), stop = window_.stop().pack_at(i);
        return {t, dt, window_.start(i), seen == 0.0, t + dt > stop, t + 0.5 * dt > stop};
    }

    template <bool Masked> WINDAGE_INLINE void add(const instant& now, std::size_t i) {
        // Where all lanes enter the window together one count is enough for a reducer that stays undefined by itself.
        constexpr bool counts_lanes = Masked || !Reducer::stays_undefined;
        const wide seen = counts_lanes ? wide::load(seen_ + i) : wide(0.0);
        const sample_point at{wide::load(values_ + i), now.t - now.start, now.dt, now.is_first, now.is_last,
                              now.is_outside_after};
        wide v[Reducer::values], before[Reducer::values];
        for (int k = 0; k < Reducer::values; ++k) before[k] = v[k] = wide::load(running_ + k * size_ + i);
        if constexpr (requires { reducer_.add(v, at, i); })
            reducer_.add(v, at, i);
        else
            reducer_.add(v, at);
        // x - x is zero, or undefined where x is not finite: one such sample leaves the whole measure undefined,
        // because comparisons would skip it and a trial would pass on what is left.
        const wide doubt = at.x - at.x;
        if constexpr (!counts_lanes) v[0] += doubt;
        if constexpr (Masked) {
            const auto inside = window_.inside(now.t, i);
            for (int k = 0; k < Reducer::values; ++k) v[k] = select(inside, v[k], before[k]);
            select(inside, seen + (1.0 + doubt), seen).store(seen_ + i);
        } else if constexpr (counts_lanes) {
            (seen + (1.0 + doubt)).store(seen_ + i);
        }
        for (int k = 0; k < Reducer::values; ++k) v[k].store(running_ + k * size_ + i);
    }

    constant_signal values_;
    const held_value& period_;
    std::size_t size_;
    measure_window window_;
    Reducer reducer_;
    signal running_, seen_;
    std::int64_t samples_ = 0; // inside the window, where all lanes enter it together
};

} // namespace windage
