// What the loop asks of a controller. One call a sample for a whole block of trials.
#pragma once

#include <cstdint>

#include <windage/lanes/signal.hpp>

namespace windage {

class controller {
public:
    virtual ~controller() = default;

    virtual void begin(const trial_block& block, const held_value& initial_command) = 0;

    /// Sample k: `reference` holds r and its derivatives, `applied` the limited command of the sample before.
    virtual void sample(std::int64_t k, const signal* reference, constant_signal measured, constant_signal applied) = 0;

    /// Sets to zero what has decayed to nothing (lanes/settle.hpp).
    virtual void settle_states() = 0;
    virtual constant_signal output() const = 0;
    /// Derivatives of the reference that `sample` reads.
    virtual int reference_derivatives() const = 0;
    virtual int estimates() const = 0;
    virtual constant_signal estimate(int i) const = 0;
};

} // namespace windage
