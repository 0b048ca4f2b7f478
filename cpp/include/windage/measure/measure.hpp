// Measures: one number a trial, computed while the trial runs. Nothing of the signal is kept.
#pragma once

#include <memory>

#include <windage/lanes/signal.hpp>
#include <windage/measure/description.hpp>

namespace windage {

/// The value that the output should end at, for the measures of a response.
class target_source {
public:
    virtual ~target_source() = default;
    virtual void target(const held_value& time, signal out) const = 0;
};

/// What a measure needs to know of the timing of a trial.
struct measure_timing {
    const held_value& period; ///< sample period
    const held_value& end;    ///< time of the last sample
};

class measure {
public:
    virtual ~measure() = default;
    virtual void begin(const trial_block& block, const target_source& targets) = 0;
    /// One sample at `time`.
    virtual void update(constant_signal time) = 0;
    virtual void finish(signal result) const = 0;
};

/// The measure described, reading the signal `values`; throws std::invalid_argument.
std::unique_ptr<measure> make_measure(const measure_description& d, constant_signal values,
                                      const measure_timing& timing, signal_arena& arena);

} // namespace windage
