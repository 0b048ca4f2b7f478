#include <windage/plant/linear_plant.hpp>

#include <algorithm>
#include <stdexcept>

#include <windage/plant/matrix_exponential.hpp>
#include <windage/plant/refused_trial.hpp>

namespace windage {
namespace {

const plant_description& checked(const plant_description& d, const plant_disturbances& w) {
    check_linear(d);
    check_linear_disturbances(d, w.count());
    if (d.initial_state.size() != d.states.size())
        throw std::invalid_argument("plant: one initial state a state is expected");
    return d;
}

std::vector<lane_value> lane_values(const std::vector<number>& numbers, signal_arena& arena) {
    std::vector<lane_value> values;
    for (const number& n : numbers) values.emplace_back(n, arena);
    return values;
}

bool has_general_output(plant_kind kind) {
    return kind == plant_kind::transfer_function || kind == plant_kind::state_space;
}

// Inputs that keep their values: the command, then the disturbances.
drive held_inputs(const linear_model& m) {
    drive v{lane_matrix(m.a.rows(), 1 + m.e.columns()), {}};
    for (int i = 0; i < m.a.rows(); ++i) {
        v.g(i, 0) = m.b(i, 0);
        for (int k = 0; k < m.e.columns(); ++k) v.g(i, 1 + k) = m.e(i, k);
    }
    return v;
}

// A result that is not finite is no error: that trial diverges.
void expect_accurate(const step_matrices& step, const trial_block& trials, std::size_t i) {
    constexpr double largest_error = 1e-13;
    for (int lane = 0; lane < lanes; ++lane)
        if (step.error[lane] > largest_error)
            throw refused_trial(trials, i + std::size_t(lane),
                                "moves between two samples in a way that cannot be computed accurately enough: its "
                                "modes are too many and too close together; write it as equations, or in other states");
}

} // namespace

linear_plant::linear_plant(const plant_description& d, number lag, const plant_timing& timing,
                           const plant_disturbances& w, signal_arena& arena)
    : d_(checked(d, w)), timing_(timing), w_(w), size_(arena.block_size()), states_(int(d.states.size())),
      order_(lag.is_constant(0.0) ? states_ : states_ + 1), w_count_(w.count()), has_lag_(order_ > states_),
      output_is_first_state_(!has_general_output(d.kind)), lag_(lag, arena), numbers_(lane_values(d.numbers, arena)),
      initial_state_(lane_values(d.initial_state, arena)), x_(arena.take(order_)), next_(arena.take(order_)),
      output_(arena.take()), middle_(arena.take()), phi_(order_, order_, is_same(), arena),
      before_(order_, 1, is_same(), arena), after_(order_, 1, is_same(), arena),
      gamma_w_(order_, w_count_, is_same(), arena), c_(1, order_, is_same(), arena) {
    for (int k = 0; k < w_count_; ++k) {
        w_middle_.push_back(arena.take());
        if (!w.is_zero(k)) acting_.push_back(k);
    }
    w_now_.resize(acting_.size());
}

// All lanes are the same plant at the same instants.
bool linear_plant::is_same() const {
    const bool same_numbers =
        std::all_of(numbers_.begin(), numbers_.end(), [](const lane_value& v) { return v.is_same(); });
    return same_numbers && are_same(lag_, timing_.period, timing_.fraction);
}

void linear_plant::begin(const trial_block& trials, const held_value& initial_command) {
    lag_.begin(trials);
    for (lane_value& n : numbers_) n.begin(trials);
    for (int i = 0; i < states_; ++i) {
        initial_state_[i].begin(trials);
        initial_state_[i].copy_to(x_ + i * size_, size_);
    }
    if (has_lag_) initial_command.copy_to(x_ + states_ * size_, size_);
    const std::size_t packs = is_same() ? lanes : size_;
    for (std::size_t i = 0; i < packs; i += lanes) sample_exactly(i, trials);
}

void linear_plant::sample_exactly(std::size_t i, const trial_block& trials) {
    std::vector<wide> numbers;
    for (const lane_value& n : numbers_) numbers.push_back(n.pack_at(i));
    const linear_model own = realise(d_, numbers), m = has_lag_ ? with_lag(own, lag_.pack_at(i)) : own;
    const wide period = timing_.period.pack_at(i);
    const step_matrices whole = transition(m.a, held_inputs(m), period);
    expect_accurate(whole, trials, i);
    for (int r = 0; r < order_; ++r) {
        for (int k = 0; k < order_; ++k) phi_.set(r, k, i, whole.phi(r, k));
        after_.set(r, 0, i, whole.gamma(r, 0));
        for (int k = 0; k < w_count_; ++k) gamma_w_.set(r, k, i, whole.gamma(r, 1 + k));
        c_.set(0, r, i, m.c(0, r));
    }
    if (!timing_.is_split) return;
    // The command before the change acts all the time, and the change for the rest of the interval.
    const step_matrices rest = transition(m.a, {m.b, {}}, period - timing_.fraction.pack_at(i));
    expect_accurate(rest, trials, i);
    for (int r = 0; r < order_; ++r) {
        after_.set(r, 0, i, rest.gamma(r, 0));
        before_.set(r, 0, i, whole.gamma(r, 0) - rest.gamma(r, 0));
    }
}

void linear_plant::evaluate_output(constant_signal, constant_signal) {
    if (output_is_first_state_) return;
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        wide y = 0.0;
        for (int k = 0; k < order_; ++k) y += c_.pack_at(0, k, i) * wide::load(x_ + k * size_ + i);
        y.store(output_ + i);
    });
}

void linear_plant::find_disturbances(const sample_interval& interval) {
    bool has_middle = false;
    for (std::size_t k = 0; k < acting_.size(); ++k) {
        const int which = acting_[k];
        w_now_[k] = w_.now(which);
        if (w_.holds(which)) continue;
        if (!has_middle)
            for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
                (wide::load(interval.time + i) + 0.5 * timing_.period.pack_at(i)).store(middle_ + i);
            });
        has_middle = true;
        w_.evaluate(which, middle_, false, w_middle_[which]);
        w_now_[k] = w_middle_[which];
    }
}

void linear_plant::advance(const sample_interval& interval) {
    find_disturbances(interval);
    switch (order_) {
    case 1: return advance_order<1>(interval);
    case 2: return advance_order<2>(interval);
    case 3: return advance_order<3>(interval);
    case 4: return advance_order<4>(interval);
    default: return advance_any_order(interval);
    }
}

// Row r of the new state; `n` states, known to the compiler for the usual plants.
WINDAGE_INLINE wide linear_plant::next_state(int r, int n, const sample_interval& interval, std::size_t i) const {
    wide sum = after_.pack_at(r, 0, i) * wide::load(interval.after + i);
    if (timing_.is_split) sum += before_.pack_at(r, 0, i) * wide::load(interval.before + i);
#pragma GCC unroll 4
    for (int k = 0; k < n; ++k) sum += phi_.pack_at(r, k, i) * wide::load(x_ + k * size_ + i);
    for (std::size_t k = 0; k < acting_.size(); ++k)
        sum += gamma_w_.pack_at(r, acting_[k], i) * wide::load(w_now_[k] + i);
    return sum;
}

template <int Order> void linear_plant::advance_order(const sample_interval& interval) {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        wide next[Order];
#pragma GCC unroll 4
        for (int r = 0; r < Order; ++r) next[r] = next_state(r, Order, interval, i);
#pragma GCC unroll 4
        for (int r = 0; r < Order; ++r) next[r].store(x_ + r * size_ + i);
    });
}

void linear_plant::advance_any_order(const sample_interval& interval) {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        for (int r = 0; r < order_; ++r) next_state(r, order_, interval, i).store(next_ + r * size_ + i);
    });
    std::copy_n(next_, std::size_t(order_) * size_, x_);
}

} // namespace windage
