// A linear stock plant whose differential equations are integrated like those of any other plant: an independent way
// to the motion that `linear_plant` takes from the matrix exponential. A loop whose integrator is
// `integrator_kind::reference` gets this one, so that the audit of a run covers linear plants too.
//
// The states are integrated in balanced units, in which the output's tolerance is that of every state. Steps are
// explicit: a plant faster than some 2^-14 of the sample period would need more of them than step control has, and is
// refused (plant/refused_trial.hpp): it cannot be audited.
#pragma once

#include <windage/plant/linear_model.hpp>
#include <windage/plant/ode_plant.hpp>

namespace windage {

class linear_ode final : public ode_plant {
public:
    linear_ode(const plant_description& d, const integration_settings& settings, const plant_timing& timing,
               const plant_disturbances& w, signal_arena& arena);

    void evaluate_output(constant_signal time, constant_signal input) override;
    void advance(const sample_interval& interval) override;
    constant_signal output() const override { return output_; }
    constant_signal state(int i) const override { return shown_[i]; }

private:
    constant_signal output_between(constant_signal, const std::vector<constant_signal>&) override {
        show_states();
        evaluate_output(nullptr, nullptr);
        return output_;
    }
    void begin_plant(const trial_block& block) override;
    void balance(const linear_model& m, wide period, std::size_t i, const trial_block& block);
    void derivative(const block_state& x, block_state& dx, const stage& s) override;
    void show_states();

    plant_description d_;
    const plant_timing timing_;
    int w_count_;
    std::vector<lane_value> numbers_;
    held_matrix a_, b_, e_, c_, unit_; // in balanced units
    std::vector<signal> shown_;        // states in their own units
    signal output_;
};

} // namespace windage
