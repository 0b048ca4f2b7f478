// White noise of unit standard deviation for a block of trials: one draw a sample, a pure function of
// (seed, trial, stream, sample). Two consecutive samples share one call of the generator.
#pragma once

#include <windage/lanes/philox.hpp>
#include <windage/lanes/signal.hpp>

namespace windage {

class white_noise {
public:
    white_noise(std::uint32_t stream, signal_arena& arena) : stream_(stream), even_(arena.take()), odd_(arena.take()) {}

    void begin(const trial_block& block) { block_ = &block; }

    /// The draws of sample k; samples must be asked for in order 0, 1, 2, ...
    constant_signal sample(std::int64_t k) {
        if (k % 2 != 0) return odd_;
        const stream_key key{block_->seed, stream_};
        for_each_pack(block_->size, [&](std::size_t i) WINDAGE_LANE_LOOP {
            wide first, second;
            normal_pair(block_->trials + i, key, std::uint32_t(k / 2), first, second);
            first.store(even_ + i);
            second.store(odd_ + i);
        });
        return even_;
    }

private:
    std::uint32_t stream_;
    signal even_, odd_;
    const trial_block* block_ = nullptr;
};

} // namespace windage
