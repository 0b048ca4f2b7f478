#include <windage/plant/linear_plant.hpp>

#include <algorithm>
#include <stdexcept>

#include <windage/plant/matrix_exponential.hpp>
#include <windage/plant/refused_trial.hpp>
#include <windage/plant/roundoff.hpp>

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

// Lightly damped modes close to each other, and states of which the output is a small difference.
void linear_plant::expect_small_roundoff(const linear_model& m, const step_matrices& step, const trial_block& trials,
                                         std::size_t i) const {
    constexpr double largest_roundoff = 1e-9;
    if (order_ < 3) return;
    const wide roundoff = relative_roundoff(step.phi, acting_.held(step.gamma), m.c);
    for (int lane = 0; lane < lanes; ++lane)
        if (roundoff[lane] > largest_roundoff)
            throw refused_trial(trials, i + std::size_t(lane),
                                "would lose its digits to rounding from sample to sample: its modes are too close "
                                "together for this form; write it as a state space of its modes, or as equations");
}

linear_plant::linear_plant(const plant_description& d, number lag, const plant_timing& timing,
                           const plant_disturbances& w, signal_arena& arena)
    : d_(checked(d, w)), timing_(timing), w_(w), size_(arena.block_size()), states_(int(d.states.size())),
      order_(lag.is_constant(0.0) ? states_ : states_ + 1), has_lag_(order_ > states_),
      output_is_first_state_(!has_general_output(d.kind)), lag_(lag, arena), numbers_(lane_values(d.numbers, arena)),
      initial_state_(lane_values(d.initial_state, arena)), x_(arena.take(order_)), next_(arena.take(order_)),
      output_(arena.take()), acting_(w, arena), phi_(order_, order_, is_same(), arena),
      before_(order_, 1, is_same(), arena), gamma_(order_, acting_.columns(), is_same(), arena),
      c_(1, order_, is_same(), arena), probed_(timing.probe ? arena.take() : nullptr),
      probe_phi_(timing.probe ? 1 : 0, order_, is_same(), arena),
      probe_before_(timing.probe ? 1 : 0, 1, is_same(), arena),
      probe_gamma_(timing.probe ? 1 : 0, acting_.columns(), is_same(), arena) {
    if (w.are_held()) return;
    from_ = arena.take();
    until_ = arena.take();
    end_ = arena.take();
}

// All lanes are the same plant at the same instants.
bool linear_plant::is_same() const {
    const bool same_numbers =
        std::all_of(numbers_.begin(), numbers_.end(), [](const lane_value& v) { return v.is_same(); });
    const bool same_probe = !timing_.probe || timing_.probe->is_same();
    return same_numbers && same_probe && acting_.is_same() && are_same(lag_, timing_.period, timing_.fraction);
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

linear_model linear_plant::model_at(std::size_t i) const {
    std::vector<wide> numbers;
    for (const lane_value& n : numbers_) numbers.push_back(n.pack_at(i));
    const linear_model own = realise(d_, numbers);
    return has_lag_ ? with_lag(own, lag_.pack_at(i)) : own;
}

void linear_plant::sample_exactly(std::size_t i, const trial_block& trials) {
    const linear_model m = model_at(i);
    const wide period = timing_.period.pack_at(i);
    const step_matrices whole = acting_.step(m, period, period, i);
    expect_accurate(whole, trials, i);
    expect_small_roundoff(m, whole, trials, i);
    if (timing_.probe) sample_probe(m, trials, i);
    for (int r = 0; r < order_; ++r) {
        for (int k = 0; k < order_; ++k) phi_.set(r, k, i, whole.phi(r, k));
        for (int k = 0; k < acting_.columns(); ++k) gamma_.set(r, k, i, whole.gamma(r, k));
        c_.set(0, r, i, m.c(0, r));
    }
    if (!timing_.is_split) return;
    // The command before the change acts all the time, and the change for the rest of the interval.
    const step_matrices rest = transition(m.a, m.a_low, {m.b, {}}, period - timing_.fraction.pack_at(i));
    expect_accurate(rest, trials, i);
    for (int r = 0; r < order_; ++r) {
        gamma_.set(r, 0, i, rest.gamma(r, 0));
        before_.set(r, 0, i, whole.gamma(r, 0) - rest.gamma(r, 0));
    }
}

// The same for the output at the probe, which may lie before or after the change of the command.
void linear_plant::sample_probe(const linear_model& m, const trial_block& trials, std::size_t i) {
    const wide period = timing_.period.pack_at(i), wanted = timing_.probe->pack_at(i);
    const wide span = select(wanted > 0.0, wanted, period); // lanes without a probe are not read
    const step_matrices whole = acting_.step(m, span, period, i);
    expect_accurate(whole, trials, i);
    const auto seen = [&](const lane_matrix& x, int column) {
        wide sum = m.c(0, 0) * x(0, column);
        for (int r = 1; r < order_; ++r) sum += m.c(0, r) * x(r, column);
        return sum;
    };
    for (int k = 0; k < order_; ++k) probe_phi_.set(0, k, i, seen(whole.phi, k));
    for (int k = 0; k < acting_.columns(); ++k) probe_gamma_.set(0, k, i, seen(whole.gamma, k));
    if (!timing_.is_split) return;
    const step_matrices rest =
        transition(m.a, m.a_low, {m.b, {}}, maximum(span - timing_.fraction.pack_at(i), wide(0.0)));
    expect_accurate(rest, trials, i);
    probe_gamma_.set(0, 0, i, seen(rest.gamma, 0));
    probe_before_.set(0, 0, i, seen(whole.gamma, 0) - seen(rest.gamma, 0));
}

// From the states at the start of the interval.
void linear_plant::probe(const sample_interval& interval) {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        wide y = 0.0 + probe_gamma_.pack_at(0, 0, i) * wide::load(interval.after + i);
        if (timing_.is_split) y += probe_before_.pack_at(0, 0, i) * wide::load(interval.before + i);
        for (int k = 0; k < order_; ++k) y += probe_phi_.pack_at(0, k, i) * wide::load(x_ + k * size_ + i);
        for (const exosystem::input& v : inputs_) y += probe_gamma_.pack_at(0, v.column, i) * wide::load(v.value + i);
        y.store(probed_ + i);
    });
}

void linear_plant::evaluate_output(constant_signal, constant_signal) {
    if (output_is_first_state_) return;
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        wide y = 0.0;
        for (int k = 0; k < order_; ++k) y += c_.pack_at(0, k, i) * wide::load(x_ + k * size_ + i);
        y.store(output_ + i);
    });
}

void linear_plant::advance(const sample_interval& interval) {
    inputs_ = acting_.at_start(interval.time);
    if (timing_.probe) probe(interval);
    move_on(interval);
    if (w_.break_soon()) add_jumps(interval.time);
}

// What the motion at the start of the interval does not know of acts from its own instant to the end.
void linear_plant::add_jumps(constant_signal time) {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide start = wide::load(time + i);
        start.store(from_ + i);
        (start + timing_.period.pack_at(i)).store(end_ + i);
    });
    while (w_.piece_end(from_, end_, until_)) {
        inputs_ = acting_.jumps_at(until_);
        const auto same = [this](constant_signal s) {
            return std::all_of(s, s + size_, [s](double x) { return x == s[0]; });
        };
        const bool is_one = is_same() && same(until_) && same(end_);
        step_matrices rest;
        for (std::size_t i = 0; i < size_; i += lanes) {
            const wide left = wide::load(end_ + i) - wide::load(until_ + i);
            const auto jumps = left > 0.0;
            if (!any(jumps)) continue;
            if (timing_.probe) add_jump_to_probe(model_at(i), time, i);
            if (!is_one || i == 0) rest = acting_.step(model_at(i), left, timing_.period.pack_at(i), i);
            add_jump(rest, jumps, i);
        }
        std::copy_n(until_, size_, from_);
    }
}

void linear_plant::add_jump_to_probe(const linear_model& m, constant_signal time, std::size_t i) {
    const wide left = wide::load(time + i) + timing_.probe->pack_at(i) - wide::load(until_ + i);
    const auto sees = (left > 0.0) & (wide::load(until_ + i) < wide::load(end_ + i));
    if (!any(sees)) return;
    const step_matrices rest =
        acting_.step(m, select(sees, left, timing_.period.pack_at(i)), timing_.period.pack_at(i), i);
    wide sum = wide::load(probed_ + i);
    for (const exosystem::input& v : inputs_)
        for (int r = 0; r < order_; ++r) sum += m.c(0, r) * rest.gamma(r, v.column) * wide::load(v.value + i);
    select(sees, sum, wide::load(probed_ + i)).store(probed_ + i);
}

void linear_plant::add_jump(const step_matrices& rest, mask<lanes> where, std::size_t i) {
    for (int r = 0; r < order_; ++r) {
        const signal state = x_ + std::size_t(r) * size_ + i;
        wide sum = wide::load(state);
        for (const exosystem::input& v : inputs_) sum += rest.gamma(r, v.column) * wide::load(v.value + i);
        select(where, sum, wide::load(state)).store(state);
    }
}

void linear_plant::move_on(const sample_interval& interval) {
    switch (order_) {
    case 1: return advance_order<1>(interval);
    case 2: return advance_order<2>(interval);
    case 3: return advance_order<3>(interval);
    case 4: return advance_order<4>(interval);
    default: return advance_any_order(interval);
    }
}

// Row r of the new state; `n` states, known to the compiler for the usual plants. The sum starts at a zero whose sign
// no later zero changes: whether an input that is zero is added or left out makes no digit.
WINDAGE_INLINE wide linear_plant::next_state(int r, int n, const sample_interval& interval, std::size_t i) const {
    wide sum = 0.0 + gamma_.pack_at(r, 0, i) * wide::load(interval.after + i);
    if (timing_.is_split) sum += before_.pack_at(r, 0, i) * wide::load(interval.before + i);
#pragma GCC unroll 4
    for (int k = 0; k < n; ++k) sum += phi_.pack_at(r, k, i) * wide::load(x_ + k * size_ + i);
    for (const exosystem::input& v : inputs_) sum += gamma_.pack_at(r, v.column, i) * wide::load(v.value + i);
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
