// Disturbances: inputs of the plant that the controller does not choose. A function of time is evaluated wherever the
// integrator asks for it; a noise changes at each sample and is held in between.
#pragma once

#include <vector>

#include <windage/loop/clock.hpp>
#include <windage/loop/sampled_noise.hpp>
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
    double next_break(double t, std::size_t lane) const { return function_.next_break(t, lane); }
    bool has_common_breaks() const { return function_.has_common_breaks(); }
    /// The terms of its function, which move each in its way between the breaks.
    int terms() const { return function_.terms(); }
    const time_function& term(int i) const { return function_.term(i); }

    /// Keeps its value until the next sample.
    bool holds() const { return function_.holds(clock_); }
    /// Never changes between two samples.
    bool is_held() const { return function_.is_constant(); }
    bool is_zero() const { return noises_.empty() && function_.is_constant(0.0); }
    constant_signal now() const { return now_; }

private:
    void add_noises(signal to) const;

    const sample_clock& clock_;
    std::size_t size_;
    time_function function_;
    std::vector<sampled_noise> noises_;
    signal function_now_ = nullptr, sum_ = nullptr; // null where the noise is all there is; where there is none
    constant_signal now_;
};

} // namespace windage
