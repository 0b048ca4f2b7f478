// A plant written as equations: its right-hand side is a tape.
#pragma once

#include <optional>

#include <windage/plant/ode_plant.hpp>
#include <windage/plant/tape.hpp>

namespace windage {

class equation_plant final : public ode_plant {
public:
    equation_plant(const plant_description& d, const integration_settings& settings, const plant_timing& timing,
                   const plant_disturbances& w, signal_arena& arena);

    void evaluate_output(constant_signal time, constant_signal input) override;
    constant_signal output() const override { return output_state_ ? x_[*output_state_] : output_; }

private:
    constant_signal output_between(constant_signal time, const std::vector<constant_signal>& disturbances) override;
    void begin_step(const block_state& x, const stage& s) override;
    void derivative(const block_state& x, block_state& dx, const stage& s) override;
    void begin_plant(const trial_block& block) override;
    /// An input of a tape that is bound from outside.
    struct binding {
        std::size_t input;
        source_kind kind;
        std::size_t index;
    };
    static std::vector<binding> bindings(const program& p, const std::vector<bool>& held, bool wanted);
    void bind(tape& t, const std::vector<binding>& which, const block_state& x, constant_signal time,
              constant_signal command, const constant_signal* disturbances);

    std::vector<bool> held_; // derivative inputs that keep their value during a step
    std::vector<binding> held_bindings_, moving_bindings_, output_bindings_;
    std::optional<int> output_state_; // where the output is a state as it is
    tape derivatives_, output_tape_;
    const plant_disturbances& disturbances_;
    std::vector<constant_signal> now_;
    signal output_;
};

} // namespace windage
