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
    virtual void target(constant_signal time, signal out) const = 0;
};

/// What a measure needs to know of the timing of a block.
struct measure_timing {
    constant_signal period; ///< sample period of each lane
    constant_signal end;    ///< time of each lane's last sample
    bool is_uniform;        ///< sample instants and last sample are the same in every lane
};

class measure {
public:
    virtual ~measure() = default;
    virtual void begin(const trial_block& block, const measure_timing& timing, const target_source& targets) = 0;
    /// One sample at `time`.
    virtual void update(constant_signal time) = 0;
    virtual void finish(signal result) const = 0;
};

/// The measure described, reading the signal `values`; throws std::invalid_argument.
std::unique_ptr<measure> make_measure(const measure_description& d, constant_signal values, signal_arena& arena);

} // namespace windage
