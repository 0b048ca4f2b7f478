// A plant whose differential equations are integrated at fixed steps between samples, together with the first-order
// lag of the actuator where there is one. What the equations are is left to the derived plants.
// A step in which a disturbance breaks is taken in pieces that end where the lane's own disturbances do, so that no
// method loses its order there. Lanes without a break take it in one piece, with the digits that they have alone.
#pragma once

#include <vector>

#include <boost/numeric/odeint/stepper/euler.hpp>
#include <boost/numeric/odeint/stepper/runge_kutta4_classic.hpp>
#include <boost/numeric/odeint/stepper/runge_kutta_cash_karp54.hpp>

#include <windage/lanes/settle.hpp>
#include <windage/plant/block_state.hpp>
#include <windage/plant/description.hpp>
#include <windage/plant/plant.hpp>
#include <windage/plant/step_plan.hpp>

namespace windage {

namespace odeint = boost::numeric::odeint;

struct integration_settings {
    integrator_kind kind = integrator_kind::rk4;
    int steps_per_sample = 1;
    double tolerance = 1e-10; ///< of integrator_kind::reference
    number lag;               ///< time constant of the actuator, 0: none
};

class ode_plant : public plant {
public:
    ode_plant(const plant_description& d, const integration_settings& settings, const plant_timing& timing,
              const plant_disturbances& w, bool reads_time, signal_arena& arena);

    void begin(const trial_block& block, const held_value& initial_command) override;
    void advance(const sample_interval& interval) override;
    void settle_states() override { settle(x_.data(), x_.size()); }
    constant_signal state(int i) const override { return x_[i]; }
    int states() const override { return states_; }
    constant_signal probed_output() const override { return timing_.probe ? probe_[1] : nullptr; }
    constant_signal lagged_input() const override { return has_lag_ ? x_[states_] : nullptr; }

protected:
    /// What acts during one stage of one step.
    struct stage {
        constant_signal step = nullptr;    ///< length h of the whole step
        constant_signal time = nullptr;    ///< of the stage; null unless something reads it
        constant_signal command = nullptr; ///< after the delay, before the lag
        std::vector<constant_signal> disturbances;
    };

    /// A step is about to be taken: its length, command and held disturbances are those of `s`.
    virtual void begin_step(const block_state&, const stage&) {}
    /// dx = h f(t, x, u, w) of the plant's own states.
    virtual void derivative(const block_state& x, block_state& dx, const stage& s) = 0;
    /// One step of every lane; `stages` as many as the integrator has.
    virtual void take_step(const std::vector<stage>& stages);
    virtual void begin_plant(const trial_block& block) = 0;
    /// The output for the states as they are, at a time between samples and under the disturbances of that time.
    virtual constant_signal output_between(constant_signal time, const std::vector<constant_signal>& disturbances) = 0;

    std::size_t size_;
    int states_;
    bool has_lag_;
    integrator_kind integrator_;
    block_state x_;
    held_value inverse_lag_;

private:
    void full_derivative(const block_state& x, block_state& dx, const stage& s);
    void find_moving();
    bool needs_times() const { return reads_time_ || !moving_.empty(); }
    void prepare_stages(constant_signal start, constant_signal length, bool own_times);
    bool piece_end(constant_signal from, constant_signal end, signal until);
    bool take_step_in_pieces();
    void take_rest_of_step();
    void restore_common_times();
    void advance_reference(const sample_interval& interval);
    void set_probes(constant_signal time);
    void probe(constant_signal from, constant_signal until);
    void integrate_pieces(constant_signal start, constant_signal length, constant_signal command);
    void integrate_reference(constant_signal start, constant_signal length, constant_signal command);

    const plant_disturbances& w_;
    double tolerance_;
    const plant_timing timing_;
    bool reads_time_;
    std::vector<lane_value> initial_state_;
    lane_value lag_;
    step_plan plan_;
    std::vector<int> moving_;       // disturbances that change before the next sample
    std::vector<double> abscissae_; // distinct fractions of a step at which stages lie
    std::vector<int> stage_buffer_; // which of them each stage uses
    std::vector<stage> stages_;
    std::vector<signal> stage_time_;                // one a distinct abscissa
    std::vector<std::vector<signal>> stage_values_; // per abscissa, one a disturbance
    block_state piece_, kept_;                      // start, end, length and end of the step; states before a piece
    block_state probe_;                             // its instant, the output there; then disturbances there
    std::vector<constant_signal> at_probe_;
    odeint::euler<block_state, double, block_state, double, block_algebra> euler_;
    odeint::runge_kutta4_classic<block_state, double, block_state, double, block_algebra> rk4_;
    odeint::runge_kutta_cash_karp54<block_state, double, block_state, double, block_algebra> cash_karp_;
};

} // namespace windage
