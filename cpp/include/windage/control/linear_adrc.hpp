// Linear active disturbance rejection control, output form and error form, of any order, with a current observer.
// Output form: Herbst 2013, Electronics 2(3) 246-279, doi 10.3390/electronics2030246.
// Error form: Madonski, Herbst, Stankovic 2023, Control Theory Technol., doi 10.1007/s11768-023-00129-y.
#pragma once

#include <vector>

#include <windage/control/controller.hpp>
#include <windage/control/description.hpp>
#include <windage/lanes/settle.hpp>

namespace windage {

class linear_adrc : public controller {
public:
    linear_adrc(const controller_description& d, const held_value& sample_period, signal_arena& arena);

    void begin(const trial_block& block, const held_value& initial_command) override;
    void sample(std::int64_t k, const signal* reference, constant_signal measured, constant_signal applied) override;
    void settle_states() override { settle(estimates_, std::size_t(estimates()) * size_); }
    constant_signal output() const override { return output_; }
    int reference_derivatives() const override;
    int estimates() const override { return d_.order + 1; }
    constant_signal estimate(int i) const override { return estimates_ + std::size_t(i) * size_; }

private:
    template <int Order>
    void sample_order(std::int64_t k, const signal* reference, constant_signal measured, constant_signal fed);
    template <int Order, adrc_form Form, bool StartsMeasured>
    void sample_form(const signal* reference, constant_signal measured, constant_signal fed);
    template <int Order> struct numbers;
    template <int Order> struct number_reader;
    template <int Order, adrc_form Form>
    wide command(const wide* x, const numbers<Order>& n, const signal* reference, std::size_t i) const;
    void place_gains();

    controller_description d_;
    std::size_t size_;
    lane_value controller_bandwidth_, observer_bandwidth_, b0_, controller_factor_, observer_factor_;
    std::vector<lane_value> given_controller_gains_, given_observer_gains_;
    const held_value& period_;
    std::vector<held_value> controller_gains_; // n, each divided by b0
    std::vector<held_value> observer_gains_;   // n + 1
    std::vector<held_value> period_powers_;    // Ts^m / m!
    held_value inverse_b0_;
    signal estimates_, output_;
};

} // namespace windage
