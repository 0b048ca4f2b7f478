#include <windage/loop/actuator.hpp>

namespace windage {
namespace {

bool changes_nothing(const actuator_description& d) {
    return !d.has_limits && d.rate_limit.is_constant(0.0) && d.resolution.is_constant(0.0);
}

} // namespace

command_limiter::command_limiter(const actuator_description& d, const sample_clock& clock, constant_signal wanted,
                                 signal_arena& arena)
    : period_(clock.period()), low_(d.low, arena), high_(d.high, arena), rate_limit_(d.rate_limit, arena),
      resolution_(d.resolution, arena), initial_(d.initial, arena), has_limits_(d.has_limits),
      is_transparent_(changes_nothing(d)), wanted_(wanted), start_(are_same(initial_, low_, high_), arena),
      largest_change_(are_same(period_, rate_limit_), arena), unrounded_(arena.take()), command_(arena.take()),
      size_(arena.block_size()) {}

void command_limiter::begin(const trial_block& block) {
    for (lane_value* n : {&low_, &high_, &rate_limit_, &resolution_, &initial_}) n->begin(block);
    constexpr double unlimited = 0x1p1000;
    largest_change_.fill([&](std::size_t i) {
        const wide rate = rate_limit_.pack_at(i);
        return select(rate > 0.0, rate * period_.pack_at(i), unlimited);
    });
    start_.fill([&](std::size_t i) {
        const wide initial = initial_.pack_at(i);
        return has_limits_ ? clip(initial, low_.pack_at(i), high_.pack_at(i)) : initial;
    });
    start_.copy_to(unrounded_, size_);
    start_.copy_to(command_, size_);
}

void command_limiter::sample() {
    if (is_transparent_) return;
    const bool limits_rate = !rate_limit_.is_constant(0.0), rounds = !resolution_.is_constant(0.0);
    const auto limit = [&](std::size_t i, wide low, wide high, wide largest_change, wide resolution) WINDAGE_LANE_LOOP {
        wide u = wide::load(wanted_ + i);
        if (has_limits_) u = clip(u, low, high);
        if (limits_rate) {
            const wide before = wide::load(unrounded_ + i);
            u = clip(u, before - largest_change, before + largest_change);
            u.store(unrounded_ + i);
        }
        if (rounds) u = has_limits_ ? quantise_within(u, resolution, low, high) : quantise(u, resolution);
        u.store(command_ + i);
    };
    for_each_pack_with(size_, limit, low_, high_, largest_change_, resolution_);
}

} // namespace windage
