// The command on its way to the plant: limits, rate limit and resolution at each sample, then the transport delay.
// A command is never beyond its limits. One that reaches a limit is that limit to the bit, whatever the resolution, so
// that saturation is seen; between them it is rounded and then clipped, like the code of a converter.
// The first-order lag that follows is integrated together with the plant (plant/ode_plant.hpp).
#pragma once

#include <windage/loop/clock.hpp>
#include <windage/loop/description.hpp>
#include <windage/loop/quantiser.hpp>

namespace windage {

class command_limiter {
public:
    /// `wanted`: the output of the controller. A limiter that changes nothing hands on that very signal.
    command_limiter(const actuator_description& d, const sample_clock& clock, constant_signal wanted,
                    signal_arena& arena);

    void begin(const trial_block& block);
    void sample();
    constant_signal command() const { return is_transparent_ ? wanted_ : command_; }
    /// Command before the first sample: the description's, or the limit of the trial that it lies beyond.
    const held_value& initial() const { return start_; }

private:
    const held_value& period_;
    lane_value low_, high_, rate_limit_, resolution_, initial_;
    bool has_limits_, is_transparent_;
    constant_signal wanted_;
    held_value start_, largest_change_; // before the first sample; in a sample
    signal unrounded_;                  // what the rate limit starts from: changes below half a resolution must add up
    signal command_;
    std::size_t size_;
};

} // namespace windage
