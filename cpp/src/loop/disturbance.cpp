#include <windage/loop/disturbance.hpp>

#include <algorithm>

namespace windage {

disturbance::disturbance(const disturbance_description& d, const sample_clock& clock, bool time_is_uniform,
                         signal_arena& arena)
    : clock_(clock), size_(arena.block_size()), function_(d.function, time_is_uniform, clock.period(), arena) {
    for (const noise_description& n : d.noises) noises_.emplace_back(n, clock, arena);
    const bool is_one_noise = noises_.size() == 1 && function_.is_constant(0.0);
    if (!is_one_noise) function_now_ = arena.take();
    if (!is_one_noise && !noises_.empty()) sum_ = arena.take();
    now_ = is_one_noise ? noises_[0].now() : sum_ ? sum_ : function_now_;
}

void disturbance::begin(const trial_block& block) {
    function_.begin(block);
    for (sampled_noise& n : noises_) n.begin(block);
}

void disturbance::sample(std::int64_t k) {
    for (sampled_noise& n : noises_) n.sample(k);
    if (function_now_) {
        signal out[1] = {function_now_};
        function_.sample(clock_, out, 0);
    }
    if (!sum_) return;
    std::copy_n(function_now_, size_, sum_);
    add_noises(sum_);
}

void disturbance::add_noises(signal to) const {
    for (const sampled_noise& n : noises_)
        for_each_pack(size_, [&](std::size_t i)
                                 WINDAGE_LANE_LOOP { (wide::load(to + i) + wide::load(n.now() + i)).store(to + i); });
}

void disturbance::evaluate(constant_signal time, jump_side side, signal out, bool own_times) const {
    // The noise differs between lanes: `out` is then never what a function of common times has left there.
    signal outs[1] = {out};
    if (own_times || sum_) {
        function_.evaluate_at_own_times(time, side, outs, 0);
        return add_noises(out);
    }
    function_.evaluate(time, outs, 0, side);
}

} // namespace windage
