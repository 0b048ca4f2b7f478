// Functions of time over a block of trials, with their derivatives: references and disturbances.
// Where nothing differs between the trials the value is computed for one pack and copied to the others.
#pragma once

#include <vector>

#include <windage/loop/description.hpp>
#include <windage/lanes/signal.hpp>

namespace windage {

class time_function {
public:
    /// `time_is_uniform`: all lanes are evaluated at the same instants.
    time_function(const time_function_description& d, bool time_is_uniform, signal_arena& arena);

    void begin(const trial_block& block);

    /// Value and `derivatives` time derivatives at `time`, into out[0 .. derivatives].
    void evaluate(constant_signal time, signal* out, int derivatives) const;

    /// Never changes within a trial.
    bool is_constant() const { return kind_ == time_function_kind::constant; }

private:
    wide number_at(std::size_t which, std::size_t i) const { return wide::load(numbers_[which].data() + i); }
    void evaluate_pack(std::size_t i, wide t, wide* out, int derivatives) const;
    void sine_pack(std::size_t i, wide t, wide* out, int derivatives) const;
    void quintic_pack(std::size_t i, wide t, wide* out, int derivatives) const;
    void jerk_limited_pack(std::size_t i, wide t, wide* out, int derivatives) const;
    void table_pack(std::size_t i, wide t, wide* out, int derivatives) const;
    void table_uniform(double t, wide* out, int derivatives) const;
    void plan_profiles();

    time_function_kind kind_;
    std::size_t size_;
    bool uniform_;
    std::vector<lane_value> numbers_;
    std::vector<signal> derived_;  // angular frequency of a sine; phase times of a jerk-limited profile
};

} // namespace windage
