#include <windage/loop/output_delay.hpp>

#include <algorithm>
#include <bit>

#include <windage/loop/delay_line.hpp>

namespace windage {
namespace {

bool is_always_whole(const loop_description& d) {
    if (!d.sensor.delay.is_constant() || !d.sample_period.is_constant()) return d.sensor.delay.is_constant(0.0);
    return split_delay(d.sensor.delay.value, d.sample_period.value).fraction[0] == 0.0;
}

} // namespace

output_delay::output_delay(const loop_description& d, const held_value& sample_period, signal_arena& arena)
    : period_(sample_period), delay_(d.sensor.delay, arena), size_(arena.block_size()),
      is_absent_(d.sensor.delay.is_constant(0.0)), has_probe_(!is_always_whole(d)),
      whole_(are_same(delay_, sample_period), arena), probe_(whole_.is_same(), arena),
      delayed_(is_absent_ ? nullptr : arena.take()) {}

void output_delay::begin(const trial_block& block) {
    delay_.begin(block);
    whole_.fill([&](std::size_t i) { return split_delay(delay_.pack_at(i), period_.pack_at(i)).whole; });
    probe_.fill([&](std::size_t i) {
        const wide period = period_.pack_at(i), fraction = split_delay(delay_.pack_at(i), period).fraction;
        return select(fraction > 0.0, period - fraction, 0.0);
    });
    if (is_absent_) return;
    double longest = 0.0;
    for (std::size_t lane = 0; lane < size_; ++lane) longest = std::max(longest, whole_[lane]);
    depth_ = std::int64_t(std::bit_ceil(std::uint64_t(longest) + 1)); // a power of two wraps without a division
    history_.resize(std::size_t(depth_) * size_);
}

void output_delay::sample(std::int64_t k, constant_signal output, constant_signal between) {
    if (is_absent_) return;
    if (k == 0)
        for (std::int64_t before = 0; before < depth_; ++before) std::copy_n(output, size_, slot(before));
    else if (!has_probe_)
        std::copy_n(output, size_, slot(k));
    else
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            select(probe_.pack_at(i) > 0.0, wide::load(between + i), wide::load(output + i)).store(slot(k) + i);
        });
    if (whole_.is_same()) return void(std::copy_n(slot(k - std::int64_t(whole_[0])), size_, delayed_));
    for (std::size_t lane = 0; lane < size_; ++lane) delayed_[lane] = slot(k - std::int64_t(whole_[lane]))[lane];
}

} // namespace windage
