// Dead time of the sensor, exact for any non-negative delay: it sees y(t_k - tau), tau = m Ts + phi. Where phi is not
// zero that lies between two samples, Ts - phi after the earlier one, and the plant is asked for its output there
// (`plant_timing::probe`), each lane at its own instant. Before time 0 the output is what it is at time 0.
#pragma once

#include <vector>

#include <windage/lanes/signal.hpp>
#include <windage/loop/description.hpp>

namespace windage {

class output_delay {
public:
    output_delay(const loop_description& d, const held_value& sample_period, signal_arena& arena);

    void begin(const trial_block& block);
    /// `between`: the output at the probes of the interval before sample k; not read where there are none.
    void sample(std::int64_t k, constant_signal output, constant_signal between);

    bool is_absent() const { return is_absent_; }
    /// Null where the delay is a whole number of samples in every trial.
    const held_value* probe() const { return has_probe_ ? &probe_ : nullptr; }
    constant_signal delayed() const { return delayed_; }

private:
    double* slot(std::int64_t k) { return history_.data() + std::size_t(k & (depth_ - 1)) * size_; }

    const held_value& period_;
    lane_value delay_;
    std::size_t size_;
    bool is_absent_, has_probe_;
    held_value whole_, probe_;
    std::int64_t depth_ = 1;
    std::vector<double> history_;
    signal delayed_;
};

} // namespace windage
