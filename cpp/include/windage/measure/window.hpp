// The window of a measure: the samples from `after` to `before`, both included. Instants are compared with a small part
// of the sample period as allowance, since k * Ts and a decimal time rarely agree to the last bit.
#pragma once

#include <windage/measure/measure.hpp>

namespace windage {

class measure_window {
public:
    measure_window(const measure_description& d, const measure_timing& timing, signal_arena& arena)
        : timing_(timing), after_(d.after, arena), before_(d.before, arena),
          start_(are_same(after_, timing.period), arena), stop_(are_same(before_, timing.end, timing.period), arena),
          last_sample_(stop_.is_same(), arena), ends_there_(stop_.is_same(), arena) {}

    void begin(const trial_block& block) {
        after_.begin(block);
        before_.begin(block);
        const auto allowance = [&](std::size_t i) { return 1e-6 * timing_.period.pack_at(i); };
        start_.fill([&](std::size_t i) { return after_.pack_at(i) - allowance(i); });
        const auto end = [&](std::size_t i) { return minimum(before_.pack_at(i), timing_.end.pack_at(i)); };
        stop_.fill([&](std::size_t i) { return end(i) + allowance(i); });
        last_sample_.fill([&](std::size_t i) {
            const wide period = timing_.period.pack_at(i);
            return floor(stop_.pack_at(i) / period) * period;
        });
        ends_there_.fill([&](std::size_t i) { return as_number(end(i) - last_sample_.pack_at(i) <= allowance(i)); });
    }

    /// All lanes are inside together or outside together.
    bool is_uniform() const { return are_same(start_, stop_); }
    bool uniformly_inside(constant_signal time) const { return time[0] >= start_[0] && time[0] <= stop_[0]; }
    mask<lanes> inside(wide time, std::size_t i) const {
        return (time >= start_.pack_at(i)) & (time <= stop_.pack_at(i));
    }
    wide start(std::size_t i) const { return after_.pack_at(i); }
    const held_value& stop() const { return stop_; }
    window_end end() const { return {last_sample_, ends_there_}; }

private:
    const measure_timing timing_;
    lane_value after_, before_;
    held_value start_, stop_, last_sample_, ends_there_;
};

} // namespace windage
