// The fixed steps between two samples, each lane with its own.
//
// A split interval gets one step more than asked for: ceil(S phi / Ts) of them cover the part before the command
// changes and the others the part after it, so that no step is longer than Ts / S and every step ends where the
// command changes. odeint integrates each step over tau in [0, 1] of x' = h f, which makes the step length h a signal.
#pragma once

#include <algorithm>

#include <windage/plant/plant.hpp>

namespace windage {

class step_plan {
public:
    step_plan(int steps_per_sample, const plant_timing& timing, signal_arena& arena)
        : timing_(timing), asked_(steps_per_sample), size_(arena.block_size()), first_(arena.take()),
          length_before_(arena.take()), length_after_(arena.take()), mixed_length_(arena.take()),
          mixed_command_(arena.take()), start_(arena.take()) {}

    int steps() const { return timing_.is_split ? asked_ + 1 : asked_; }

    void begin() {
        const double asked = asked_;
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            const wide ts = timing_.period.pack_at(i);
            if (!timing_.is_split) return (ts * (1.0 / asked)).store(length_after_ + i);
            const wide phi = timing_.fraction.pack_at(i), first = -floor(-(phi / ts * asked));
            first.store(first_ + i);
            (phi / maximum(first, wide(1.0))).store(length_before_ + i);
            ((ts - phi) / (asked + 1.0 - first)).store(length_after_ + i);
        });
        least_first_ = *std::min_element(first_, first_ + size_);
        most_first_ = *std::max_element(first_, first_ + size_);
    }

    /// Sets up step j: its length h, the command that acts during it and, where it is asked for, its start.
    void prepare(int j, const sample_interval& interval, bool needs_start) {
        if (j < least_first_) { // before the change in every lane
            length_ = length_before_;
            command_ = interval.before;
        } else if (j >= most_first_) {
            length_ = length_after_;
            command_ = interval.after;
        } else {
            choose_part(j, interval);
        }
        if (needs_start) find_start(j, interval.time);
    }

    constant_signal step() const { return length_; }
    constant_signal start() const { return start_; }
    constant_signal command() const { return command_; }

private:
    void choose_part(double j, const sample_interval& interval) {
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            const auto is_before = wide(j) < wide::load(first_ + i);
            select(is_before, wide::load(length_before_ + i), wide::load(length_after_ + i)).store(mixed_length_ + i);
            select(is_before, wide::load(interval.before + i), wide::load(interval.after + i))
                .store(mixed_command_ + i);
        });
        length_ = mixed_length_;
        command_ = mixed_command_;
    }

    void find_start(double j, constant_signal time) {
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            const wide step = wide::load(length_ + i), first = wide::load(first_ + i);
            const wide later = timing_.fraction.pack_at(i) + (j - first) * step;
            const wide since = timing_.is_split ? select(wide(j) < first, j * step, later) : j * step;
            (wide::load(time + i) + since).store(start_ + i);
        });
    }

    const plant_timing timing_;
    int asked_;
    std::size_t size_;
    signal first_; // steps before the command changes; none where the interval is not split
    signal length_before_, length_after_, mixed_length_, mixed_command_, start_;
    double least_first_ = 0.0, most_first_ = 0.0;
    constant_signal length_ = nullptr, command_ = nullptr;
};

} // namespace windage
