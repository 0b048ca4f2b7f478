// Linear stock plants, sampled exactly: x_{k+1} = Phi x_k + Gamma_b u_b + Gamma_a u_a + Gamma_w w with the matrix
// exponential, for a command that changes from u_b to u_a anywhere inside the interval, and including the first-order
// lag of the actuator. Disturbances are held over the interval; a function of time takes its value at mid-interval.
#pragma once

#include <vector>

#include <Eigen/Core>

#include <windage/plant/description.hpp>
#include <windage/plant/plant.hpp>

namespace windage {

/// x' = A x + B u + E w, y = C x.
struct linear_model {
    Eigen::MatrixXd a, b, e, c;
};

/// The state-space model of a linear stock plant for the numbers of one trial.
linear_model realise(const plant_description& d, const std::vector<double>& numbers);

class linear_plant final : public plant {
public:
    linear_plant(const plant_description& d, number lag, bool split, const plant_disturbances& w, signal_arena& arena);

    void begin(const trial_block& block, constant_signal sample_period, constant_signal fraction,
               const lane_value& initial_command) override;
    void evaluate_output(constant_signal time, constant_signal input) override;
    void advance(const sample_interval& interval) override;
    constant_signal output() const override { return output_; }
    constant_signal state(int i) const override { return x_ + std::size_t(i) * size_; }
    int states() const override { return states_; }
    constant_signal lagged_input() const override { return has_lag_ ? state(states_) : nullptr; }

private:
    struct sampled;
    sampled sample_exactly(const linear_model& m, double period, double fraction) const;
    void store(const sampled& s, std::size_t lane);

    plant_description d_;
    const plant_disturbances& w_;
    std::size_t size_;
    int states_, order_; // order: with the lag
    bool has_lag_, split_;
    lane_value lag_;
    std::vector<lane_value> numbers_, initial_state_;
    signal x_, next_, output_, middle_;
    signal phi_, before_, after_, gamma_w_, c_; // row by row
    std::vector<signal> w_middle_;
    std::vector<constant_signal> middle_values_;
};

} // namespace windage
