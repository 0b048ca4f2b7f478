#include <windage/loop/time_function.hpp>

#include <algorithm>
#include <limits>
#include <stdexcept>

#include <windage/control/limits.hpp>
#include <windage/lanes/elementary.hpp>
#include <windage/plant/plant.hpp>

#include "profile.hpp"

namespace windage {
namespace {

constexpr double two_pi = 6.283185307179586476925;
constexpr double infinity = std::numeric_limits<double>::infinity();

bool all_constant(const time_function_description& d) {
    return std::all_of(d.numbers.begin(), d.numbers.end(), [](const number& n) { return n.is_constant(); }) &&
           std::all_of(d.terms.begin(), d.terms.end(), all_constant);
}

} // namespace

time_function::time_function(const time_function_description& d, bool time_is_uniform, const held_value& period,
                             signal_arena& arena)
    : kind_(d.kind), size_(arena.block_size()), uniform_(time_is_uniform && all_constant(d)), period_(period),
      has_common_numbers_(all_constant(d)), allowance_(period.is_same(), arena) {
    if ((kind_ == time_function_kind::sum) == d.terms.empty())
        throw std::invalid_argument("time function: a sum, and nothing else, has terms");
    for (const number& n : d.numbers) numbers_.emplace_back(n, arena);
    for (const time_function_description& t : d.terms) terms_.emplace_back(t, time_is_uniform, period, arena);
    if (kind_ == time_function_kind::sine) angular_frequency_.emplace(d.numbers[1].is_constant(), arena);
    if (kind_ == time_function_kind::jerk_limited)
        for (int i = 0; i < 5; ++i) derived_.push_back(arena.take());
}

void time_function::begin(const trial_block& block) {
    holds_until_ = -infinity;
    for (lane_value& n : numbers_) n.begin(block);
    for (time_function& t : terms_) t.begin(block);
    allowance_.fill([&](std::size_t i) { return same_instant * period_.pack_at(i); });
    if (angular_frequency_) angular_frequency_->fill([&](std::size_t i) { return two_pi / number_at(1, i); });
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        if (kind_ == time_function_kind::jerk_limited)
            plan_profile(number_at(0, i), number_at(2, i), number_at(3, i), number_at(4, i)).store(derived_.data(), i);
    });
}

void time_function::sample(const sample_clock& clock, signal* out, int derivatives) {
    const double t = clock.time()[0];
    if (t < holds_until_) return;
    evaluate(clock.time(), out, derivatives);
    holds_until_ = clock.is_uniform() ? holds_until(t) : -infinity;
}

bool time_function::holds(const sample_clock& clock) const {
    constexpr double a_little_more = 1.000001; // than a period: the end of the interval is asked for as well
    return is_constant() || (clock.is_uniform() && clock.time()[0] + a_little_more * clock.period()[0] < holds_until_);
}

// Time until which, from t on, value and derivatives stay as they are in every lane; t or less where they move.
double time_function::holds_until(double t) const {
    double earliest = infinity;
    const std::size_t different = uniform_ ? 1 : size_;
    for (std::size_t lane = 0; lane < different && earliest > t; ++lane)
        earliest = std::min(earliest, lane_holds_until(t, lane));
    return earliest;
}

double time_function::lane_holds_until(double t, std::size_t lane) const {
    const double allowance = allowance_[lane];
    const auto number = [&](std::size_t k) { return numbers_[k][lane]; };
    // A jump to come ends the rest early enough for both of its sides.
    const auto until_jump = [&](double at) { return t + allowance >= at ? infinity : at - 2.0 * allowance; };
    const auto unless_moving = [&](double start, double stop) {
        if (t + allowance < start) return start - 2.0 * allowance;
        return t - allowance > stop ? infinity : t;
    };
    switch (kind_) {
    case time_function_kind::constant: return infinity;
    case time_function_kind::step: return until_jump(number(1));
    case time_function_kind::pulse: return std::min(until_jump(number(1)), until_jump(number(1) + number(2)));
    case time_function_kind::ramp: return unless_moving(number(1), number(2));
    case time_function_kind::sine: return unless_moving(number(4), infinity);
    case time_function_kind::quintic: return unless_moving(number(1), number(1) + number(2));
    case time_function_kind::jerk_limited:
        return unless_moving(
            number(1), number(1) + profile_plan::load(derived_.data(), lane / lanes * lanes).total[int(lane % lanes)]);
    case time_function_kind::table_linear: return unless_moving(number(0), number(numbers_.size() / 2 - 1));
    case time_function_kind::table_hold: return until_jump(next_table_time(t + allowance, lane));
    case time_function_kind::sum: {
        double earliest = infinity;
        for (const time_function& term : terms_) earliest = std::min(earliest, term.lane_holds_until(t, lane));
        return earliest;
    }
    }
    return t;
}

time_function::instant time_function::instant_at(wide t, std::size_t i, jump_side side) const {
    const wide allowance = allowance_.pack_at(i);
    return {t, side == jump_side::after ? t + allowance : t - allowance};
}

void time_function::evaluate(constant_signal time, signal* out, int derivatives, jump_side side) const {
    wide values[max_order + 1];
    if (!uniform_) {
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            evaluate_pack(i, instant_at(wide::load(time + i), i, side), values, derivatives);
            for (int d = 0; d <= derivatives; ++d) values[d].store(out[d] + i);
        });
        return;
    }
    const instant at = instant_at(wide::load(time), 0, side);
    evaluate_pack(0, at, values, derivatives);
    for (int d = 0; d <= derivatives; ++d) write_where_new(values[d], out[d]);
}

// A signal of a uniform function is written by nothing else, hence the same in all lanes at any time.
void time_function::write_where_new(wide value, signal out) const {
    if (bits_of(value)[0] == bits_of(wide::load(out))[0]) return;
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP { value.store(out + i); });
}

void time_function::evaluate_at_own_times(constant_signal time, jump_side side, signal* out, int derivatives) const {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        wide values[max_order + 1];
        evaluate_pack(i, instant_at(wide::load(time + i), i, side), values, derivatives);
        for (int d = 0; d <= derivatives; ++d) values[d].store(out[d] + i);
    });
}

smooth_motion time_function::motion() const {
    switch (kind_) {
    case time_function_kind::ramp:
    case time_function_kind::table_linear: return {1};
    case time_function_kind::jerk_limited: return {3};
    case time_function_kind::quintic: return {5};
    case time_function_kind::sine: return {2, &*angular_frequency_};
    default: return {}; // of a sum: see its terms
    }
}

void time_function::evaluate_at_own_times(const held_value& time, const held_value& before_jump, signal out) const {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        wide value;
        const instant before = instant_at(time.pack_at(i), i, jump_side::before),
                      after = instant_at(time.pack_at(i), i, jump_side::after);
        evaluate_pack(i, {after.t, select(before_jump.pack_at(i) != 0.0, before.sided, after.sided)}, &value, 0);
        value.store(out + i);
    });
}

void time_function::evaluate_pack(std::size_t i, instant at, wide* out, int derivatives) const {
    for (int d = 1; d <= derivatives; ++d) out[d] = 0.0;
    switch (kind_) {
    case time_function_kind::constant: out[0] = number_at(0, i); return;
    case time_function_kind::step:
        out[0] = number_at(2, i) + select(at.sided >= number_at(1, i), number_at(0, i), 0.0);
        return;
    case time_function_kind::ramp: {
        const wide slope = number_at(0, i), start = number_at(1, i), stop = number_at(2, i);
        out[0] = number_at(3, i) + slope * (clip(at.t, start, stop) - start);
        if (derivatives > 0) out[1] = select((at.sided >= start) & (at.sided < stop), slope, 0.0);
        return;
    }
    case time_function_kind::pulse: {
        const wide start = number_at(1, i);
        out[0] = select((at.sided >= start) & (at.sided < start + number_at(2, i)), number_at(0, i), 0.0);
        return;
    }
    case time_function_kind::sine: return sine_pack(i, at, out, derivatives);
    case time_function_kind::quintic: return quintic_pack(i, at, out, derivatives);
    case time_function_kind::jerk_limited: return jerk_limited_pack(i, at, out, derivatives);
    case time_function_kind::table_linear:
    case time_function_kind::table_hold: return table_pack(i, at, out, derivatives);
    case time_function_kind::sum: return sum_pack(i, at, out, derivatives);
    }
}

void time_function::sum_pack(std::size_t i, instant at, wide* out, int derivatives) const {
    terms_[0].evaluate_pack(i, at, out, derivatives);
    for (std::size_t term = 1; term < terms_.size(); ++term) {
        wide more[max_order + 1];
        terms_[term].evaluate_pack(i, at, more, derivatives);
        for (int d = 0; d <= derivatives; ++d) out[d] += more[d];
    }
}

void time_function::sine_pack(std::size_t i, instant at, wide* out, int derivatives) const {
    const wide amplitude = number_at(0, i), phase = number_at(2, i), offset = number_at(3, i), start = number_at(4, i);
    const wide omega = angular_frequency_->pack_at(i);
    const auto [s, c] = sine_cosine(omega * (at.t - start) + phase);
    const wide turned[4] = {s, c, -s, -c}; // the derivatives of a sine turn by a quarter each
    const auto started = at.sided >= start;
    wide scale = amplitude;
    out[0] = offset + select(started, scale * s, 0.0);
    for (int d = 1; d <= derivatives; ++d) {
        scale = scale * omega;
        out[d] = select(started, scale * turned[d % 4], 0.0);
    }
}

void time_function::quintic_pack(std::size_t i, instant at, wide* out, int derivatives) const {
    const wide amplitude = number_at(0, i), start = number_at(1, i), duration = number_at(2, i);
    const wide s = clip((at.t - start) / duration, wide(0.0), wide(1.0));
    const auto moving = (at.sided > start) & (at.sided < start + duration);
    out[0] = number_at(3, i) + amplitude * (s * s * s * (s * (s * 6.0 - 15.0) + 10.0));
    wide scale = amplitude;
    for (int d = 1; d <= derivatives; ++d) {
        scale = scale / duration;
        wide shape = 0.0;
        if (d == 1) shape = s * s * (s * (s * 30.0 - 60.0) + 30.0);
        if (d == 2) shape = s * (s * (s * 120.0 - 180.0) + 60.0);
        if (d == 3) shape = s * (s * 360.0 - 360.0) + 60.0;
        if (d == 4) shape = s * 720.0 - 360.0;
        if (d == 5) shape = 720.0;
        out[d] = select(moving, scale * shape, 0.0);
    }
}

void time_function::jerk_limited_pack(std::size_t i, instant at, wide* out, int derivatives) const {
    const profile_plan plan = profile_plan::load(derived_.data(), i);
    wide motion[4];
    follow_profile(plan, at.t - number_at(1, i), at.sided - number_at(1, i), motion);
    const wide direction = copy_sign(wide(1.0), number_at(0, i));
    out[0] = number_at(5, i) + direction * motion[0];
    for (int d = 1; d <= std::min(derivatives, 3); ++d) out[d] = direction * motion[d];
}

// Each lane looks up its own row, first the one of the lane before it.
void time_function::table_pack(std::size_t i, instant at, wide* out, int derivatives) const {
    wide value, slope;
    std::size_t row = 0;
    for (int l = 0; l < lanes; ++l) {
        const std::size_t lane = i + std::size_t(l);
        const table_point here = table_at(at.t[l], at.sided[l], lane, row = table_row(at.sided[l], lane, row));
        value.set(l, here.value);
        slope.set(l, here.slope);
    }
    out[0] = value;
    if (derivatives > 0) out[1] = slope;
}

// The last row whose time has come, the first one before that; `guess` is tried first.
std::size_t time_function::table_row(double sided, std::size_t lane, std::size_t guess) const {
    const auto has_come = [&](std::size_t k) { return sided >= numbers_[k][lane]; };
    std::size_t low = 0, high = numbers_.size() / 2;
    if (guess + 1 < high && (guess == 0 || has_come(guess)) && !has_come(guess + 1)) return guess;
    while (high - low > 1) {
        const std::size_t middle = (low + high) / 2;
        (has_come(middle) ? low : high) = middle;
    }
    return low;
}

time_function::table_point time_function::table_at(double t, double sided, std::size_t lane, std::size_t row) const {
    const std::size_t n = numbers_.size() / 2;
    const double time = numbers_[row][lane], value = numbers_[n + row][lane];
    if (kind_ == time_function_kind::table_hold || row + 1 == n || !(sided >= time)) return {value, 0.0};
    const double span = numbers_[row + 1][lane] - time;
    const double slope = span > 0.0 ? (numbers_[n + row + 1][lane] - value) / span : 0.0;
    return {value + slope * (t - time), slope};
}

} // namespace windage
