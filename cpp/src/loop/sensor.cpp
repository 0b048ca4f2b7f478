#include <windage/loop/sensor.hpp>

#include <algorithm>

namespace windage {
namespace {

bool changes_nothing(const sensor_description& d) {
    return d.gain.is_constant(1.0) && d.bias.is_constant(0.0) && d.noise.is_constant(0.0) &&
           d.filter_frequency.is_constant(0.0) && d.resolution.is_constant(0.0) && !d.has_range;
}

} // namespace

sensor::sensor(const sensor_description& d, const sample_clock& clock, constant_signal output, signal_arena& arena)
    : period_(clock.period()), gain_(d.gain, arena), bias_(d.bias, arena), noise_level_(d.noise, arena),
      filter_frequency_(d.filter_frequency, arena), resolution_(d.resolution, arena), low_(d.low, arena),
      high_(d.high, arena), has_range_(d.has_range), is_transparent_(changes_nothing(d)), output_(output),
      filter_gain_(are_same(period_, filter_frequency_), arena), measured_(arena.take()), filtered_(arena.take()),
      size_(arena.block_size()) {
    if (!d.noise.is_constant(0.0)) noise_.emplace(d.stream, arena);
}

void sensor::begin(const trial_block& block) {
    for (lane_value* n : {&gain_, &bias_, &noise_level_, &filter_frequency_, &resolution_, &low_, &high_})
        n->begin(block);
    if (noise_) noise_->begin(block);
    // Backward Euler of T dv/dt = y - v: v += (Ts/T) / (1 + Ts/T) (y - v).
    constexpr double two_pi = 6.283185307179586476925;
    filter_gain_.fill([&](std::size_t i) {
        const wide ratio = two_pi * filter_frequency_.pack_at(i) * period_.pack_at(i);
        return select(ratio > 0.0, ratio / (1.0 + ratio), 1.0);
    });
    std::fill_n(filtered_, size_, 0.0);
}

void sensor::sample(std::int64_t k) {
    if (is_transparent_) return;
    const constant_signal noise = noise_ ? noise_->sample(k) : nullptr;
    const bool filters = !filter_frequency_.is_constant(0.0), rounds = !resolution_.is_constant(0.0);
    const auto measure = [&](std::size_t i, wide gain, wide bias, wide level, wide filter_gain, wide resolution,
                             wide low, wide high) WINDAGE_LANE_LOOP {
        wide y = gain * wide::load(output_ + i) + bias;
        if (noise) y += level * wide::load(noise + i);
        if (filters) {
            const wide before = k == 0 ? y : wide::load(filtered_ + i); // starts settled on the first reading
            y = before + filter_gain * (y - before);
            y.store(filtered_ + i);
        }
        if (rounds) y = quantise(y, resolution);
        if (has_range_) y = clip(y, low, high);
        y.store(measured_ + i);
    };
    for_each_pack_with(size_, measure, gain_, bias_, noise_level_, filter_gain_, resolution_, low_, high_);
}

} // namespace windage
