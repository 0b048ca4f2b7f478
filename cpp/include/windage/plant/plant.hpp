// What the loop asks of a plant: its output at a sample instant and its motion to the next one.
#pragma once

#include <vector>

#include <windage/lanes/signal.hpp>

namespace windage {

/// Disturbances as the plant sees them.
class plant_disturbances {
public:
    virtual ~plant_disturbances() = default;
    virtual int count() const = 0;
    /// All of them keep their value between two samples.
    virtual bool are_held() const = 0;
    /// Keeps its value from this sample to the next one.
    virtual bool holds(int which) const = 0;
    /// Zero at all times in every trial.
    virtual bool is_zero(int which) const = 0;
    virtual constant_signal now(int which) const = 0;
    /// Value of one that moves at a time within the sample interval; at the end of a step a jump at that very time is
    /// still to come.
    virtual void evaluate(int which, constant_signal time, bool ends_a_step, signal out) const = 0;
};

/// The interval between two sample instants; the command changes `fraction` seconds after its start where it is split.
struct plant_timing {
    const held_value& period;
    const held_value& fraction;
    bool is_split;
};

/// What acts during one of them.
struct sample_interval {
    constant_signal time;   ///< start
    constant_signal before; ///< command before the change; used where the interval is split
    constant_signal after;  ///< command after it
};

class plant {
public:
    virtual ~plant() = default;
    virtual void begin(const trial_block& block, const held_value& initial_command) = 0;
    /// Computes the output; `time` is the sample instant, `input` the input that acts at it.
    virtual void evaluate_output(constant_signal time, constant_signal input) = 0;
    virtual void advance(const sample_interval& interval) = 0;
    virtual constant_signal output() const = 0;
    virtual constant_signal state(int i) const = 0;
    virtual int states() const = 0;
    /// What acts on the plant after the lag of the actuator; null without a lag.
    virtual constant_signal lagged_input() const = 0;
};

} // namespace windage
