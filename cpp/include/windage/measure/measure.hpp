// Measures: one number a trial, computed while the trial runs. Nothing of the signal is kept.
#pragma once

#include <functional>
#include <memory>
#include <string>

#include <windage/lanes/signal.hpp>
#include <windage/measure/description.hpp>

namespace windage {

/// Where a window ends: at the time of its last sample, or (0 in `ends_there`) somewhere between that and the next one.
struct window_end {
    const held_value& last_sample;
    const held_value& ends_there;
};

/// The value that the output should end at, for the measures of a response.
class target_source {
public:
    virtual ~target_source() = default;
    /// The reference that holds inside the window at its last sample. Where the window ends at that very sample and the
    /// reference jumps there, it is the one before the jump: the one after it holds for no time in the window.
    virtual void target(const window_end& end, signal out) const = 0;
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

/// The signal of a name; throws std::invalid_argument where there is none.
using signal_finder = std::function<constant_signal(const std::string&)>;

/// The measure described; throws std::invalid_argument.
std::unique_ptr<measure> make_measure(const measure_description& d, const signal_finder& find,
                                      const measure_timing& timing, signal_arena& arena);

} // namespace windage
