// Transport delay of the command, exact for any non-negative delay: m whole samples and a fraction phi.
// Between t_k and t_{k+1} the plant sees u_{k-m-1} for phi seconds and u_{k-m} for the rest; each lane has its own
// m and phi. Where the delay is a whole number of samples in every trial the interval is not split at all.
#pragma once

#include <vector>

#include <windage/loop/clock.hpp>
#include <windage/loop/description.hpp>

namespace windage {

/// A delay as whole sample periods and what is left, in s.
struct delay_parts {
    wide whole, fraction;
};
delay_parts split_delay(wide delay, wide sample_period);

class delay_line {
public:
    delay_line(const loop_description& d, const held_value& sample_period, signal_arena& arena);

    void begin(const trial_block& block, const held_value& initial_command);
    void sample(std::int64_t k, constant_signal command);

    /// The interval is split: the command changes phi after the sample instant.
    bool is_split() const { return split_; }
    constant_signal before() const { return before_; }       ///< command until t_k + phi
    constant_signal after() const { return after_; }         ///< command from t_k + phi on
    const held_value& fraction() const { return fraction_; } ///< phi, s
    /// Command that acts right after the sample instant.
    constant_signal acting() const { return acting_; }
    /// No delay in any trial: the command acts as it is.
    bool is_absent() const { return is_absent_; }

    static bool needs_split(const loop_description& d);

private:
    /// Commands of sample k, also of those before the first one.
    double* slot(std::int64_t k) { return history_.data() + std::size_t(k & (depth_ - 1)) * size_; }
    delay_parts parts_at(std::size_t i) const {
        return split_delay(delay_.pack_at(i) + dead_time_.pack_at(i), period_.pack_at(i));
    }
    void choose_by_comparing(std::int64_t k);
    void choose_lane_by_lane(std::int64_t k);
    WINDAGE_INLINE void store_chosen(std::size_t i, wide before, wide after);

    const held_value& period_;
    lane_value delay_, dead_time_;
    std::size_t size_;
    bool split_, is_absent_;
    std::int64_t depth_ = 1, shortest_ = 0, longest_ = 0; // in samples
    std::vector<double> history_;
    held_value whole_, fraction_; // m and phi
    signal chosen_before_, chosen_after_, chosen_acting_;
    constant_signal before_ = nullptr, after_ = nullptr, acting_ = nullptr;
};

} // namespace windage
