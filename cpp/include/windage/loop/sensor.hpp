// The sensor after its delay (`output_delay`): y_m = clip(quantise(filter(gain * y + bias + noise))).
#pragma once

#include <optional>

#include <windage/lanes/settle.hpp>
#include <windage/loop/clock.hpp>
#include <windage/loop/description.hpp>
#include <windage/loop/noise.hpp>
#include <windage/loop/quantiser.hpp>

namespace windage {

class sensor {
public:
    /// `output`: what is measured. A sensor that changes nothing hands on that very signal.
    sensor(const sensor_description& d, const sample_clock& clock, constant_signal output, signal_arena& arena);

    void begin(const trial_block& block);
    void sample(std::int64_t k);
    void settle_states() { settle(filtered_, size_); }
    constant_signal measured() const { return is_transparent_ ? output_ : measured_; }

private:
    const held_value& period_;
    lane_value gain_, bias_, noise_level_, filter_frequency_, resolution_, low_, high_;
    bool has_range_, is_transparent_;
    constant_signal output_;
    std::optional<white_noise> noise_;
    held_value filter_gain_;
    signal measured_;
    signal filtered_;
    std::size_t size_;
};

} // namespace windage
