// What the loop asks of a plant: its output at a sample instant and its motion to the next one.
#pragma once

#include <vector>

#include <windage/lanes/signal.hpp>

namespace windage {

/// Two instants closer than this fraction of a sample period are the same instant.
inline constexpr double same_instant = 1e-9;

/// How a disturbance moves between its breaks: as a polynomial of which the derivatives up to this one are given, or,
/// with an angular frequency, as a sine about an offset, given by two.
struct smooth_motion {
    int derivatives = 0;
    const held_value* angular_frequency = nullptr;
};

/// Disturbances as the plant sees them. Between two samples they are smooth but for their breaks: instants at which one
/// of them, or a derivative of it, jumps (a step, the ends of a pulse or ramp, the corners of a table or profile). To
/// be exact, or to keep its order, a plant moves from break to break; each lane has its own:
///
///     if (w.break_soon())                                  // seldom; else the whole interval is one smooth piece
///         for (from = start; w.piece_end(from, end, until); from = until) ...   // a last, smooth piece follows
///
/// Values at the start of a piece are those after a break there, at its end those before one (`evaluate`).
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
    /// still to come. `own_times`: the times differ between lanes although those of whole steps do not.
    virtual void evaluate(int which, constant_signal time, bool ends_a_step, signal out,
                          bool own_times = false) const = 0;
    /// Never changes between two samples.
    virtual bool is_held(int which) const = 0;
    /// What it is the sum of, besides noises; each term has a motion of its own.
    virtual int terms(int which) const = 0;
    virtual smooth_motion motion(int which, int term) const = 0;
    /// Value and derivatives of the motion that begins at a sample instant.
    virtual void evaluate_motion(int which, int term, constant_signal time, signal* out) const = 0;
    /// The same at times that differ between lanes, on either side of a break.
    virtual void evaluate_motion_at_own_times(int which, int term, constant_signal time, bool ends_a_step,
                                              signal* out) const = 0;
    /// In some lane there may be a break between this sample and the next one.
    virtual bool break_soon() const = 0;
    /// The end of the smooth piece that starts at `from`: the lane's first break after it and before `end`, else `end`.
    /// False where no lane has a break. A break that is the same instant as `from` or `end` counts as none.
    virtual bool piece_end(constant_signal from, constant_signal end, signal until) const = 0;
};

/// The interval between two sample instants; the command changes `fraction` seconds after its start where it is split.
struct plant_timing {
    const held_value& period;
    const held_value& fraction;
    bool is_split;
    /// Seconds after each sample instant at which the output is asked for as well; not in lanes where it is 0.
    const held_value* probe = nullptr;
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
    /// Sets to zero what has decayed to nothing (lanes/settle.hpp).
    virtual void settle_states() = 0;
    virtual constant_signal output() const = 0;
    /// The output at `plant_timing::probe` in the interval that the plant has moved through last; null without one.
    virtual constant_signal probed_output() const = 0;
    virtual constant_signal state(int i) const = 0;
    virtual int states() const = 0;
    /// What acts on the plant after the lag of the actuator; null without a lag.
    virtual constant_signal lagged_input() const = 0;
};

} // namespace windage
