// The sensor: y_m = clip(quantise(filter(gain * y + bias + noise))).
#pragma once

#include <optional>

#include <windage/loop/clock.hpp>
#include <windage/loop/description.hpp>
#include <windage/loop/noise.hpp>
#include <windage/loop/quantiser.hpp>

namespace windage {

class sensor {
public:
    sensor(const sensor_description& d, signal_arena& arena);

    void begin(const trial_block& block, const sample_clock& clock);
    void sample(std::int64_t k, constant_signal output);
    constant_signal measured() const { return measured_; }

private:
    lane_value gain_, bias_, noise_level_, filter_frequency_, resolution_, low_, high_;
    bool has_range_;
    std::optional<white_noise> noise_;
    signal filter_gain_, measured_;
    signal filtered_;
    std::size_t size_;
};

} // namespace windage
