// The window of a measure: the samples from `after` to `before`, both included. Instants are compared with a small part
// of the sample period as allowance, since k * Ts and a decimal time rarely agree to the last bit.
#pragma once

#include <windage/measure/measure.hpp>

namespace windage {

class measure_window {
public:
    measure_window(const measure_description& d, signal_arena& arena)
        : after_(d.after, arena), before_(d.before, arena), start_(arena.take()), stop_(arena.take()),
          size_(arena.block_size()) {}

    void begin(const trial_block& block, const measure_timing& timing) {
        after_.begin(block);
        before_.begin(block);
        uniform_ = timing.is_uniform && after_.is_constant() && before_.is_constant();
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            const wide allowance = 1e-6 * wide::load(timing.period + i);
            (after_.pack_at(i) - allowance).store(start_ + i);
            (minimum(before_.pack_at(i), wide::load(timing.end + i)) + allowance).store(stop_ + i);
        });
    }

    /// All lanes are inside together or outside together.
    bool is_uniform() const { return uniform_; }
    bool uniformly_inside(constant_signal time) const { return time[0] >= start_[0] && time[0] <= stop_[0]; }
    mask<lanes> inside(wide time, std::size_t i) const {
        return (time >= wide::load(start_ + i)) & (time <= wide::load(stop_ + i));
    }
    wide start(std::size_t i) const { return after_.pack_at(i); }
    constant_signal stop() const { return stop_; }

private:
    lane_value after_, before_;
    signal start_, stop_;
    std::size_t size_;
    bool uniform_ = false;
};

} // namespace windage
