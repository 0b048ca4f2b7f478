// A measure made of two measures: their difference or their ratio.
#pragma once

#include <utility>

#include <windage/measure/measure.hpp>

namespace windage {

class combination final : public measure {
public:
    combination(measure_kind kind, std::unique_ptr<measure> first, std::unique_ptr<measure> second, signal_arena& arena)
        : kind_(kind), first_(std::move(first)), second_(std::move(second)), size_(arena.block_size()),
          of_second_(arena.take()) {}

    void begin(const trial_block& block, const target_source& targets) override {
        first_->begin(block, targets);
        second_->begin(block, targets);
    }
    void update(constant_signal time) override {
        first_->update(time);
        second_->update(time);
    }
    /// Undefined where one of the two is, for 0 / 0, and where infinity meets infinity. Anything else over zero is
    /// infinite with the sign of the numerator: a zero has no sign here, since a mean or a minimum may give either.
    void finish(signal result) const override {
        first_->finish(result);
        second_->finish(of_second_);
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            const wide a = wide::load(result + i), b = wide::load(of_second_ + i);
            (kind_ == measure_kind::ratio ? a / (b + 0.0) : a - b).store(result + i);
        });
    }

private:
    measure_kind kind_;
    std::unique_ptr<measure> first_, second_;
    std::size_t size_;
    signal of_second_;
};

} // namespace windage
