#include <windage/loop/disturbance.hpp>

#include <windage/lanes/elementary.hpp>

namespace windage {

disturbance::disturbance(const disturbance_description& d, bool time_is_uniform, signal_arena& arena)
    : kind_(d.kind), size_(arena.block_size()), now_(arena.take()) {
    if (kind_ == disturbance_kind::time_function) {
        function_.emplace(d.function, time_is_uniform, arena);
        return;
    }
    for (const number& n : d.numbers) numbers_.emplace_back(n, arena);
    noise_.emplace(d.stream, arena);
    keep_ = arena.take();
    gain_ = arena.take();
}

void disturbance::begin(const trial_block& block, const sample_clock& clock) {
    if (function_) return function_->begin(block, clock.period().data());
    for (lane_value& n : numbers_) n.begin(block);
    noise_->begin(block);
    if (kind_ == disturbance_kind::gauss_markov) return begin_gauss_markov(block, clock);
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        wide(0.0).store(keep_ + i);
        square_root(numbers_[0].pack_at(i) / clock.period().pack_at(i)).store(gain_ + i);
    });
}

// Exact sampling of dw/dt = -w/T + noise with stationary standard deviation sigma (Gelb 1974, Applied Optimal
// Estimation, section 3.8, from memory): w_{k+1} = exp(-Ts/T) w_k + sigma sqrt(1 - exp(-2 Ts/T)) n_k.
void disturbance::begin_gauss_markov(const trial_block&, const sample_clock& clock) {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide sigma = numbers_[0].pack_at(i), ratio = clock.period().pack_at(i) / numbers_[1].pack_at(i);
        exponential(-ratio).store(keep_ + i);
        (sigma * square_root(-exponential_minus_one(-2.0 * ratio))).store(gain_ + i);
    });
}

void disturbance::sample(std::int64_t k, const sample_clock& clock) {
    if (function_) {
        signal out[1] = {now_};
        return function_->evaluate(clock.time(), out, 0);
    }
    const constant_signal n = noise_->sample(k);
    const bool starts_stationary = k == 0 && kind_ == disturbance_kind::gauss_markov;
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide draw = wide::load(n + i);
        const wide w = starts_stationary ? numbers_[0].pack_at(i) * draw
                                         : wide::load(keep_ + i) * wide::load(now_ + i) + wide::load(gain_ + i) * draw;
        w.store(now_ + i);
    });
}

void disturbance::evaluate(constant_signal time, jump_side side, signal out) const {
    signal outs[1] = {out};
    function_->evaluate(time, outs, 0, side);
}

} // namespace windage
