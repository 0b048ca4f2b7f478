// Linear stock plants, sampled exactly: x_{k+1} = Phi x_k + Gamma_b u_b + Gamma_a u_a + Gamma_w w with the matrix
// exponential, for a command that changes from u_b to u_a anywhere inside the interval, and including the first-order
// lag of the actuator. Disturbances are exact too: noises are held, functions of time are polynomials or sines between
// their breaks, which may lie anywhere inside the interval, each trial with its own.
#pragma once

#include <vector>

#include <windage/lanes/settle.hpp>
#include <windage/plant/description.hpp>
#include <windage/plant/exosystem.hpp>
#include <windage/plant/linear_model.hpp>
#include <windage/plant/plant.hpp>

namespace windage {

class linear_plant final : public plant {
public:
    linear_plant(const plant_description& d, number lag, const plant_timing& timing, const plant_disturbances& w,
                 signal_arena& arena);

    void begin(const trial_block& block, const held_value& initial_command) override;
    void evaluate_output(constant_signal time, constant_signal input) override;
    void advance(const sample_interval& interval) override;
    void settle_states() override { settle(x_, std::size_t(order_) * size_); }
    constant_signal output() const override { return output_is_first_state_ ? x_ : output_; }
    constant_signal state(int i) const override { return x_ + std::size_t(i) * size_; }
    int states() const override { return states_; }
    constant_signal lagged_input() const override { return has_lag_ ? state(states_) : nullptr; }
    constant_signal probed_output() const override { return probed_; }

private:
    bool is_same() const;
    void sample_exactly(std::size_t i, const trial_block& trials);
    void expect_small_roundoff(const linear_model& m, const step_matrices& step, const trial_block& trials,
                               std::size_t i) const;
    linear_model model_at(std::size_t i) const;
    void sample_probe(const linear_model& m, const trial_block& trials, std::size_t i);
    void probe(const sample_interval& interval);
    void add_jumps(constant_signal time);
    void add_jump_to_probe(const linear_model& m, constant_signal time, std::size_t i);
    void add_jump(const step_matrices& rest, mask<lanes> where, std::size_t i);
    void move_on(const sample_interval& interval);
    wide next_state(int row, int order, const sample_interval& interval, std::size_t i) const;
    template <int Order> void advance_order(const sample_interval& interval);
    void advance_any_order(const sample_interval& interval);

    plant_description d_;
    const plant_timing timing_;
    const plant_disturbances& w_;
    std::size_t size_;
    int states_, order_; // order: with the lag
    bool has_lag_, output_is_first_state_;
    lane_value lag_;
    std::vector<lane_value> numbers_, initial_state_;
    signal x_, next_, output_;
    exosystem acting_;
    held_matrix phi_, before_, gamma_, c_;
    std::vector<exosystem::input> inputs_;
    signal probed_ = nullptr;                                 // output at the probe
    held_matrix probe_phi_, probe_before_, probe_gamma_;      // what it is made of, one row each
    signal from_ = nullptr, until_ = nullptr, end_ = nullptr; // pieces between breaks
};

} // namespace windage
