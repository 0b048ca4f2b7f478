// The clock of a block: sample instants t_k = k Ts, each lane with its own sample period and duration.
// Times are products of an integer and the period, never sums of steps.
#pragma once

#include <algorithm>

#include <windage/lanes/signal.hpp>

namespace windage {

class sample_clock {
public:
    sample_clock(number sample_period, number duration, signal_arena& arena)
        : period_(sample_period, arena), duration_(duration, arena), time_(arena.take()),
          end_(are_same(period_, duration_), arena) {}

    void begin(const trial_block& block) {
        period_.begin(block);
        duration_.begin(block);
        samples_ = 0;
        end_.fill([&](std::size_t i) {
            // The last sample is the last multiple of Ts not above the duration, up to rounding of their ratio.
            const wide count = floor(duration_.pack_at(i) / period_.pack_at(i) + 1e-9);
            for (int lane = 0; lane < lanes; ++lane) samples_ = std::max(samples_, std::int64_t(count[lane]));
            return count * period_.pack_at(i);
        });
    }

    void tick(std::int64_t k, std::size_t size) {
        const wide count = double(k);
        for_each_pack(size, [&](std::size_t i) WINDAGE_LANE_LOOP { (count * period_.pack_at(i)).store(time_ + i); });
    }

    /// Index of the last sample of the longest trial.
    std::int64_t last_sample() const { return samples_; }
    /// All lanes are sampled at the same instants.
    bool is_uniform() const { return period_.is_constant(); }
    constant_signal time() const { return time_; }
    const lane_value& period() const { return period_; }
    /// Time of each lane's own last sample.
    const held_value& end() const { return end_; }
    bool end_is_uniform() const { return end_.is_same(); }

private:
    lane_value period_, duration_;
    signal time_;
    held_value end_;
    std::int64_t samples_ = 0;
};

} // namespace windage
