// All disturbances of a loop, as the plant sees them.
#pragma once

#include <vector>

#include <windage/loop/disturbance.hpp>
#include <windage/plant/plant.hpp>

namespace windage {

class disturbance_bank final : public plant_disturbances {
public:
    disturbance_bank(const std::vector<disturbance_description>& d, const sample_clock& clock, bool time_is_uniform,
                     signal_arena& arena);

    void begin(const trial_block& block);
    void sample(std::int64_t k);

    int count() const override { return int(all_.size()); }
    bool are_held() const override;
    bool holds(int which) const override { return all_[which].holds(); }
    bool is_zero(int which) const override { return all_[which].is_zero(); }
    constant_signal now(int which) const override { return all_[which].now(); }
    void evaluate(int which, constant_signal time, bool ends_a_step, signal out, bool own_times) const override {
        all_[which].evaluate(time, side(ends_a_step), out, own_times);
    }
    bool is_held(int which) const override { return all_[which].is_held(); }
    int terms(int which) const override { return all_[which].terms(); }
    smooth_motion motion(int which, int term) const override { return all_[which].term(term).motion(); }
    void evaluate_motion(int which, int term, constant_signal time, signal* out) const override {
        const time_function& f = all_[which].term(term);
        f.evaluate(time, out, f.motion().derivatives);
    }
    void evaluate_motion_at_own_times(int which, int term, constant_signal time, bool ends_a_step,
                                      signal* out) const override {
        const time_function& f = all_[which].term(term);
        f.evaluate_at_own_times(time, side(ends_a_step), out, f.motion().derivatives);
    }
    bool break_soon() const override { return break_soon_; }
    bool piece_end(constant_signal from, constant_signal end, signal until) const override;

private:
    static jump_side side(bool ends_a_step) { return ends_a_step ? jump_side::before : jump_side::after; }
    double next_break(double t, std::size_t lane) const;
    double find_next_break(double t, std::size_t lane) const;
    void look_for_breaks(std::int64_t k);

    const sample_clock& clock_;
    std::size_t size_;
    std::vector<disturbance> all_;
    std::vector<double> next_breaks_; // of each lane, from the last look on
    bool break_soon_ = false;
    std::int64_t next_look_ = 0; // no lane has a break before this sample
};

} // namespace windage
