#include <windage/loop/delay_line.hpp>

#include <algorithm>
#include <bit>

namespace windage {
namespace {

// A delay within this fraction of a sample of a whole number of samples is that number: 3 * 0.002 / 0.002 is not
// always 3 in binary, and a split of 1e-16 s would only cost time.
constexpr double whole_tolerance = 1e-9;

} // namespace

bool delay_line::needs_split(const loop_description& d) {
    if (d.actuator.delay_is_whole && d.plant.dead_time.is_constant(0.0)) return false;
    if (!d.actuator.delay.is_constant() || !d.plant.dead_time.is_constant() || !d.sample_period.is_constant())
        return true;
    const wide samples = (d.actuator.delay.value + d.plant.dead_time.value) / d.sample_period.value;
    const wide distance = absolute(samples - floor(samples + 0.5));
    return distance[0] > whole_tolerance;
}

delay_line::delay_line(const loop_description& d, signal_arena& arena)
    : delay_(d.actuator.delay, arena), dead_time_(d.plant.dead_time, arena), size_(arena.block_size()),
      split_(needs_split(d)),
      same_for_all_(d.actuator.delay.is_constant() && d.plant.dead_time.is_constant() && d.sample_period.is_constant()),
      whole_(size_), fraction_(arena.take()), before_(arena.take()), after_(arena.take()), acting_(arena.take()) {}

void delay_line::begin(const trial_block& block, const sample_clock& clock, const lane_value& initial_command) {
    delay_.begin(block);
    dead_time_.begin(block);
    std::int64_t longest = 0;
    for (std::size_t i = 0; i < size_; i += lanes) {
        const wide period = clock.period().pack_at(i), total = delay_.pack_at(i) + dead_time_.pack_at(i);
        const wide samples = total / period;
        const wide nearest = floor(samples + 0.5);
        const auto is_whole = absolute(samples - nearest) <= whole_tolerance;
        const wide whole = select(is_whole, nearest, floor(samples));
        select(is_whole, wide(0.0), total - whole * period).store(fraction_ + i);
        for (int lane = 0; lane < lanes; ++lane) {
            whole_[i + lane] = std::int64_t(whole[lane]);
            longest = std::max(longest, whole_[i + lane]);
        }
    }
    depth_ = std::int64_t(std::bit_ceil(std::uint64_t(longest + 2))); // a power of two wraps without a division
    history_.resize(std::size_t(depth_) * size_);
    for (std::int64_t k = 0; k < depth_; ++k)
        std::copy_n(initial_command.data(), size_, history_.data() + std::size_t(k) * size_);
}

void delay_line::sample(std::int64_t k, constant_signal command) {
    std::copy_n(command, size_, slot(k));
    if (same_for_all_) {
        std::copy_n(slot(k - whole_[0]), size_, after_);
        if (split_) std::copy_n(slot(k - whole_[0] - 1), size_, before_);
    } else {
        for (std::size_t i = 0; i < size_; ++i) after_[i] = slot(k - whole_[i])[i];
        if (split_)
            for (std::size_t i = 0; i < size_; ++i) before_[i] = slot(k - whole_[i] - 1)[i];
    }
    if (split_)
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            select(wide::load(fraction_ + i) > 0.0, wide::load(before_ + i), wide::load(after_ + i)).store(acting_ + i);
        });
}

} // namespace windage
