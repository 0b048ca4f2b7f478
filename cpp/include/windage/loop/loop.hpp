// The loop of a block of trials: an ordered list of stages, each called once a sample for all trials of the block.
//
//     clock -> disturbances -> plant output -> reference -> sensor delay -> sensor -> controller -> limits -> delay ->
//     signals -> plant
//
// After `sample(k)` every signal holds its value at t_k; `advance` then moves the plant to t_{k+1}.
#pragma once

#include <map>
#include <memory>
#include <string>
#include <vector>

#include <windage/control/controller.hpp>
#include <windage/loop/actuator.hpp>
#include <windage/loop/delay_line.hpp>
#include <windage/loop/description.hpp>
#include <windage/loop/disturbance.hpp>
#include <windage/loop/output_delay.hpp>
#include <windage/loop/sensor.hpp>
#include <windage/plant/plant.hpp>
#include <windage/plant/tape.hpp>

namespace windage {

class disturbance_bank;

/// Names of every signal of a loop, in the order of a recording; throws std::invalid_argument where two are the same.
std::vector<std::string> signal_names(const loop_description& d);

class loop {
public:
    loop(const loop_description& d, signal_arena& arena);
    ~loop();

    void begin(const trial_block& block);
    /// Everything up to the plant at sample k.
    void sample(std::int64_t k);
    /// The plant from sample k to sample k + 1.
    void advance();

    const sample_clock& clock() const { return clock_; }
    const time_function& reference() const { return reference_; }
    /// Throws std::invalid_argument for a name that is no signal.
    constant_signal find(const std::string& name) const;

    /// Sets lanes of `diverged` to 1 where a state of the plant is not finite within the lane's own duration.
    void mark_diverged(signal diverged) const;

private:
    struct named_expression {
        tape formula;
        signal value;
    };

    constant_signal seen_output() const {
        return output_delay_.is_absent() ? plant_->output() : output_delay_.delayed();
    }
    constant_signal input() const { return delayed_input_ ? delayed_input_ : limiter_.command(); }
    void settle_states();
    void sample_error();
    void add_expression(const expression_description& e, signal_arena& arena);
    void name_signals(const loop_description& d);

    std::size_t size_;
    sample_clock clock_;
    std::unique_ptr<disturbance_bank> disturbances_;
    delay_line delay_;
    output_delay output_delay_;
    std::unique_ptr<plant> plant_;
    time_function reference_;
    std::vector<signal> reference_signals_;
    sensor sensor_;
    std::unique_ptr<controller> controller_;
    command_limiter limiter_;
    std::vector<named_expression> expressions_;
    signal error_;
    signal delayed_input_ = nullptr; // null where the command acts at once
    std::map<std::string, constant_signal> signals_;
};

} // namespace windage
