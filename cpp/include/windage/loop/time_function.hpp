// Functions of time over a block of trials, with their derivatives: references and disturbances.
// Where nothing differs between the trials the value is computed for one pack and copied to the others when it changes.
#pragma once

#include <optional>
#include <vector>

#include <windage/lanes/signal.hpp>
#include <windage/loop/clock.hpp>
#include <windage/loop/description.hpp>
#include <windage/plant/plant.hpp>

namespace windage {

/// The value of a function at an instant where it jumps: the one after it (at a sample instant and at the start of a
/// step) or the one before it (at the end of a step, which must not see what comes next).
enum class jump_side { after, before };

class time_function {
public:
    /// `time_is_uniform`: all lanes are evaluated at the same instants.
    /// `period`: sample period of each lane; instants closer than 1e-9 of it are the same instant.
    time_function(const time_function_description& d, bool time_is_uniform, const held_value& period,
                  signal_arena& arena);

    void begin(const trial_block& block);

    /// Value and derivatives at the sample instant, into out[0 .. derivatives]; does nothing while nothing changes. The
    /// samples of a block are asked for in their order and into the same signals.
    void sample(const sample_clock& clock, signal* out, int derivatives);
    /// Value and derivatives of the last sample hold until the next one, in every lane.
    bool holds(const sample_clock& clock) const;

    /// Value and `derivatives` time derivatives at `time`, into out[0 .. derivatives]. At a jump, `side` chooses.
    void evaluate(constant_signal time, signal* out, int derivatives, jump_side side = jump_side::after) const;
    /// The value alone, at times that may differ from lane to lane even where those of `evaluate` do not. At a jump it
    /// is the one before it where `before_jump` is not zero.
    void evaluate_at_own_times(const held_value& time, const held_value& before_jump, signal out) const;
    /// With derivatives, on one side of a jump. A signal written so must be the same in all lanes again before
    /// `evaluate` or `sample` may write it.
    void evaluate_at_own_times(constant_signal time, jump_side side, signal* out, int derivatives) const;

    /// Between two breaks, with the derivatives that `evaluate` gives; of a function that is no sum.
    smooth_motion motion() const;
    /// The terms of a sum; any other function is its only term.
    int terms() const { return terms_.empty() ? 1 : int(terms_.size()); }
    const time_function& term(int i) const { return terms_.empty() ? *this : terms_[std::size_t(i)]; }

    /// The lane's first break later than t and not the same instant; infinity if there is none. At a break the value
    /// jumps, or a derivative of it. Costs a search in a table, whatever its length.
    double next_break(double t, std::size_t lane) const;
    /// All lanes have their breaks at the same times.
    bool has_common_breaks() const;

    /// Never changes within a trial.
    bool is_constant() const { return kind_ == time_function_kind::constant; }
    bool is_constant(double x) const { return is_constant() && numbers_[0].is_constant(x); }

private:
    double holds_until(double t) const;
    double lane_holds_until(double t, std::size_t lane) const;
    wide number_at(std::size_t which, std::size_t i) const { return numbers_[which].pack_at(i); }
    /// A time, and the same time moved to the wanted side of a jump: the first for values, the second for comparisons.
    struct instant {
        wide t, sided;
    };
    instant instant_at(wide time, std::size_t i, jump_side side) const;
    void write_where_new(wide value, signal out) const;
    void evaluate_pack(std::size_t i, instant at, wide* out, int derivatives) const;
    void sine_pack(std::size_t i, instant at, wide* out, int derivatives) const;
    void quintic_pack(std::size_t i, instant at, wide* out, int derivatives) const;
    void jerk_limited_pack(std::size_t i, instant at, wide* out, int derivatives) const;
    void sum_pack(std::size_t i, instant at, wide* out, int derivatives) const;
    void table_pack(std::size_t i, instant at, wide* out, int derivatives) const;
    struct table_point {
        double value, slope;
    };
    double next_table_time(double now, std::size_t lane) const;
    std::size_t table_row(double sided, std::size_t lane, std::size_t guess) const;
    table_point table_at(double t, double sided, std::size_t lane, std::size_t row) const;

    time_function_kind kind_;
    std::size_t size_;
    bool uniform_;
    double holds_until_ = 0.0; // from the last sample that was evaluated
    const held_value& period_;
    std::vector<lane_value> numbers_;
    std::vector<time_function> terms_; // of a sum
    bool has_common_numbers_;
    held_value allowance_;        // within which two instants are the same
    std::vector<signal> derived_; // phase times of a jerk-limited profile
    std::optional<held_value> angular_frequency_;
};

} // namespace windage
