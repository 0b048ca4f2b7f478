#include <windage/loop/disturbance.hpp>

#include <windage/lanes/elementary.hpp>

namespace windage {

disturbance::disturbance(const disturbance_description& d, const sample_clock& clock, bool time_is_uniform,
                         signal_arena& arena)
    : kind_(d.kind), clock_(clock), size_(arena.block_size()), now_(arena.take()) {
    if (kind_ == disturbance_kind::time_function) {
        function_.emplace(d.function, time_is_uniform, clock.period(), arena);
        return;
    }
    for (const number& n : d.numbers) numbers_.emplace_back(n, arena);
    noise_.emplace(d.stream, arena);
    const bool same_keep = kind_ == disturbance_kind::white || are_same(clock.period(), numbers_[1]);
    keep_.emplace(same_keep, arena);
    gain_.emplace(same_keep && are_same(clock.period(), numbers_[0]), arena);
}

void disturbance::begin(const trial_block& block) {
    if (function_) return function_->begin(block);
    for (lane_value& n : numbers_) n.begin(block);
    noise_->begin(block);
    if (kind_ == disturbance_kind::gauss_markov) return begin_gauss_markov();
    keep_->fill([&](std::size_t) { return 0.0; });
    gain_->fill([&](std::size_t i) { return square_root(numbers_[0].pack_at(i) / clock_.period().pack_at(i)); });
}

// Exact sampling of dw/dt = -w/T + noise with stationary standard deviation sigma (Gelb 1974, Applied Optimal
// Estimation, section 3.8, from memory): w_{k+1} = exp(-Ts/T) w_k + sigma sqrt(1 - exp(-2 Ts/T)) n_k.
void disturbance::begin_gauss_markov() {
    const auto ratio = [&](std::size_t i) { return clock_.period().pack_at(i) / numbers_[1].pack_at(i); };
    keep_->fill([&](std::size_t i) { return exponential(-ratio(i)); });
    gain_->fill(
        [&](std::size_t i) { return numbers_[0].pack_at(i) * square_root(-exponential_minus_one(-2.0 * ratio(i))); });
}

void disturbance::sample(std::int64_t k) {
    if (function_) {
        signal out[1] = {now_};
        return function_->sample(clock_, out, 0);
    }
    const constant_signal n = noise_->sample(k);
    const bool starts_stationary = k == 0 && kind_ == disturbance_kind::gauss_markov;
    const auto move_on = [&](std::size_t i, wide keep, wide gain, wide deviation) WINDAGE_LANE_LOOP {
        const wide draw = wide::load(n + i);
        const wide w = starts_stationary ? deviation * draw : keep * wide::load(now_ + i) + gain * draw;
        w.store(now_ + i);
    };
    for_each_pack_with(size_, move_on, *keep_, *gain_, numbers_[0]);
}

void disturbance::evaluate(constant_signal time, jump_side side, signal out, bool own_times) const {
    signal outs[1] = {out};
    if (own_times) return function_->evaluate_at_own_times(time, side, outs, 0);
    function_->evaluate(time, outs, 0, side);
}

} // namespace windage
