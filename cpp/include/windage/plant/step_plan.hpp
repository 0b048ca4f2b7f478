// The fixed steps between two samples, each lane with its own.
//
// A split interval gets one step more than asked for: ceil(S phi / Ts) of them cover the part before the command
// changes and the others the part after it, so that no step is longer than Ts / S and every step ends where the
// command changes. odeint integrates each step over tau in [0, 1] of x' = h f, which makes the step length h a signal.
#pragma once

#include <windage/plant/plant.hpp>

namespace windage {

class step_plan {
public:
    step_plan(int steps_per_sample, bool split, signal_arena& arena)
        : asked_(steps_per_sample), split_(split), size_(arena.block_size()), first_(arena.take()),
          length_before_(arena.take()), length_after_(arena.take()), step_(arena.take()), start_(arena.take()),
          input_(arena.take()) {}

    int steps() const { return split_ ? asked_ + 1 : asked_; }

    void begin(constant_signal period, constant_signal fraction) {
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            const wide ts = wide::load(period + i);
            if (!split_) return (ts * (1.0 / asked_)).store(step_ + i);
            const wide phi = wide::load(fraction + i), first = -floor(-(phi / ts * double(asked_)));
            first.store(first_ + i);
            (phi / maximum(first, wide(1.0))).store(length_before_ + i);
            ((ts - phi) / (double(asked_ + 1) - first)).store(length_after_ + i);
        });
    }

    /// Sets up step j: its length h, its start and the command that acts during it.
    void prepare(int j, const sample_interval& interval) {
        const double index = j;
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            const wide time = wide::load(interval.time + i);
            if (!split_) {
                (time + index * wide::load(step_ + i)).store(start_ + i);
                return;
            }
            const wide first = wide::load(first_ + i), before = wide::load(length_before_ + i),
                       after = wide::load(length_after_ + i);
            const auto is_before = wide(index) < first;
            select(is_before, before, after).store(step_ + i);
            (time + select(is_before, index * before, wide::load(interval.fraction + i) + (index - first) * after))
                .store(start_ + i);
            select(is_before, wide::load(interval.before + i), wide::load(interval.after + i)).store(input_ + i);
        });
        command_ = split_ ? input_ : interval.after;
    }

    constant_signal step() const { return step_; }
    constant_signal start() const { return start_; }
    constant_signal command() const { return command_; }

private:
    int asked_;
    bool split_;
    std::size_t size_;
    signal first_, length_before_, length_after_, step_, start_, input_;
    constant_signal command_ = nullptr;
};

} // namespace windage
