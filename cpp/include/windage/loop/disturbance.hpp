// Disturbances: inputs of the plant that the controller does not choose. A function of time is evaluated wherever the
// integrator asks for it; a noise changes at each sample and is held in between.
#pragma once

#include <limits>
#include <memory>
#include <optional>
#include <vector>

#include <windage/loop/clock.hpp>
#include <windage/loop/noise.hpp>
#include <windage/loop/time_function.hpp>

namespace windage {

class disturbance {
public:
    disturbance(const disturbance_description& d, const sample_clock& clock, bool time_is_uniform, signal_arena& arena);

    void begin(const trial_block& block);
    /// Value at the sample instant, into `now`; noises move on to sample k.
    void sample(std::int64_t k);
    /// Value at any other time of this sample interval.
    void evaluate(constant_signal time, jump_side side, signal out, bool own_times) const;
    /// The lane's first break later than t; infinity if there is none. A noise has none between two samples.
    double next_break(double t, std::size_t lane) const {
        return function_ ? function_->next_break(t, lane) : std::numeric_limits<double>::infinity();
    }
    /// How it moves between its breaks, and with which derivatives.
    smooth_motion motion() const { return function_ ? function_->motion() : smooth_motion{}; }
    void evaluate_motion(constant_signal time, jump_side side, signal* out) const {
        function_->evaluate(time, out, motion().derivatives, side);
    }
    void evaluate_motion_at_own_times(constant_signal time, jump_side side, signal* out) const {
        function_->evaluate_at_own_times(time, side, out, motion().derivatives);
    }
    bool has_common_breaks() const { return !function_ || function_->has_common_breaks(); }

    /// Keeps its value until the next sample.
    bool holds() const { return !function_ || function_->holds(clock_); }
    /// Never changes between two samples.
    bool is_held() const { return !function_ || function_->is_constant(); }
    bool is_zero() const { return function_ && function_->is_constant(0.0); }
    constant_signal now() const { return now_; }

private:
    void begin_gauss_markov();

    disturbance_kind kind_;
    const sample_clock& clock_;
    std::size_t size_;
    std::optional<time_function> function_;
    std::vector<lane_value> numbers_;
    std::optional<white_noise> noise_;
    signal now_;
    std::optional<held_value> keep_, gain_; // of the noise: w_{k+1} = keep * w_k + gain * n
};

} // namespace windage
