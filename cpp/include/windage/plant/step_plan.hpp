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
    step_plan(int steps_per_sample, const plant_timing& timing, signal_arena& arena)
        : timing_(timing), asked_(steps_per_sample), split_(timing.is_split), size_(arena.block_size()),
          first_(are_same(timing.period, timing.fraction), arena), length_before_(first_.is_same(), arena),
          length_after_(first_.is_same(), arena), step_(arena.take()), start_(arena.take()), input_(arena.take()) {}

    int steps() const { return split_ ? asked_ + 1 : asked_; }

    void begin() {
        const double asked = asked_;
        const auto phi = [&](std::size_t i) { return timing_.fraction.pack_at(i); };
        first_.fill([&](std::size_t i) { return -floor(-(phi(i) / timing_.period.pack_at(i) * asked)); });
        length_before_.fill([&](std::size_t i) { return phi(i) / maximum(first_.pack_at(i), wide(1.0)); });
        length_after_.fill(
            [&](std::size_t i) { return (timing_.period.pack_at(i) - phi(i)) / (asked + 1.0 - first_.pack_at(i)); });
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            (timing_.period.pack_at(i) * (1.0 / asked)).store(step_ + i); // where the interval is not split
        });
    }

    /// Sets up step j: its length h, the command that acts during it and, where it is asked for, its start.
    void prepare(int j, const sample_interval& interval, bool needs_start) {
        command_ = split_ ? input_ : interval.after;
        if (split_) choose_part(j, interval);
        if (needs_start) find_start(j, interval.time);
    }

    constant_signal step() const { return step_; }
    constant_signal start() const { return start_; }
    constant_signal command() const { return command_; }

private:
    void choose_part(double j, const sample_interval& interval) {
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            const auto is_before = wide(j) < first_.pack_at(i);
            select(is_before, length_before_.pack_at(i), length_after_.pack_at(i)).store(step_ + i);
            select(is_before, wide::load(interval.before + i), wide::load(interval.after + i)).store(input_ + i);
        });
    }

    void find_start(double j, constant_signal time) {
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            const wide step = wide::load(step_ + i), first = first_.pack_at(i);
            const wide later = timing_.fraction.pack_at(i) + (j - first) * step;
            (wide::load(time + i) + (split_ ? select(wide(j) < first, j * step, later) : j * step)).store(start_ + i);
        });
    }

    const plant_timing timing_;
    int asked_;
    bool split_;
    std::size_t size_;
    held_value first_, length_before_, length_after_;
    signal step_, start_, input_;
    constant_signal command_ = nullptr;
};

} // namespace windage
