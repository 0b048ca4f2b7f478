#include <windage/loop/delay_line.hpp>

#include <algorithm>
#include <bit>

namespace windage {
namespace {

// A delay within this fraction of a sample of a whole number of samples is that number: 3 * 0.002 / 0.002 is not
// always 3 in binary, and a split of 1e-16 s would only cost time.
constexpr double whole_tolerance = 1e-9;

// Up to so many samples between the shortest and the longest delay of a block the command is chosen by comparing,
// a pack at a time; beyond, it is fetched lane by lane (measured).
constexpr std::int64_t widest_comparison = 16;

} // namespace

bool delay_line::needs_split(const loop_description& d) {
    if (d.actuator.delay_is_whole && d.plant.dead_time.is_constant(0.0)) return false;
    if (!d.actuator.delay.is_constant() || !d.plant.dead_time.is_constant() || !d.sample_period.is_constant())
        return true;
    const wide samples = (d.actuator.delay.value + d.plant.dead_time.value) / d.sample_period.value;
    const wide distance = absolute(samples - floor(samples + 0.5));
    return distance[0] > whole_tolerance;
}

delay_line::delay_line(const loop_description& d, const held_value& sample_period, signal_arena& arena)
    : period_(sample_period), delay_(d.actuator.delay, arena), dead_time_(d.plant.dead_time, arena),
      size_(arena.block_size()), split_(needs_split(d)),
      is_absent_(d.actuator.delay.is_constant(0.0) && d.plant.dead_time.is_constant(0.0)),
      whole_(are_same(delay_, dead_time_, sample_period), arena), fraction_(whole_.is_same(), arena),
      chosen_before_(arena.take()), chosen_after_(arena.take()), chosen_acting_(arena.take()) {}

void delay_line::begin(const trial_block& block, const held_value& initial_command) {
    delay_.begin(block);
    dead_time_.begin(block);
    whole_.fill([&](std::size_t i) { return parts_at(i).whole; });
    fraction_.fill([&](std::size_t i) { return parts_at(i).fraction; });
    shortest_ = longest_ = std::int64_t(whole_[0]);
    for (std::size_t lane = 1; lane < size_; ++lane) {
        shortest_ = std::min(shortest_, std::int64_t(whole_[lane]));
        longest_ = std::max(longest_, std::int64_t(whole_[lane]));
    }
    depth_ = std::int64_t(std::bit_ceil(std::uint64_t(longest_ + 2))); // a power of two wraps without a division
    history_.resize(std::size_t(depth_) * size_);
    for (std::int64_t k = 0; k < depth_; ++k) initial_command.copy_to(slot(k), size_);
}

delay_parts split_delay(wide delay, wide sample_period) {
    const wide samples = delay / sample_period, nearest = floor(samples + 0.5);
    const auto is_whole = absolute(samples - nearest) <= whole_tolerance;
    const wide whole = select(is_whole, nearest, floor(samples));
    return {whole, select(is_whole, wide(0.0), delay - whole * sample_period)};
}

void delay_line::sample(std::int64_t k, constant_signal command) {
    if (is_absent_) {
        before_ = after_ = acting_ = command;
        return;
    }
    std::copy_n(command, size_, slot(k));
    if (whole_.is_same()) {
        after_ = slot(k - shortest_);
        before_ = slot(k - shortest_ - 1);
        acting_ = split_ && fraction_[0] > 0.0 ? before_ : after_;
        return;
    }
    longest_ - shortest_ <= widest_comparison ? choose_by_comparing(k) : choose_lane_by_lane(k);
    before_ = chosen_before_;
    after_ = chosen_after_;
    acting_ = split_ ? chosen_acting_ : chosen_after_;
}

void delay_line::store_chosen(std::size_t i, wide before, wide after) {
    after.store(chosen_after_ + i);
    before.store(chosen_before_ + i);
    select(fraction_.pack_at(i) > 0.0, before, after).store(chosen_acting_ + i);
}

void delay_line::choose_by_comparing(std::int64_t k) {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide whole = whole_.pack_at(i);
        wide after = wide::load(slot(k - shortest_) + i), older = wide::load(slot(k - shortest_ - 1) + i);
        wide before = older;
        for (std::int64_t m = shortest_ + 1; m <= longest_; ++m) {
            const auto is_later = whole >= double(m);
            after = select(is_later, older, after);
            older = wide::load(slot(k - m - 1) + i);
            before = select(is_later, older, before);
        }
        store_chosen(i, before, after);
    });
}

void delay_line::choose_lane_by_lane(std::int64_t k) {
    for (std::size_t i = 0; i < size_; ++i) {
        const std::int64_t sent = k - std::int64_t(whole_[i]);
        chosen_after_[i] = slot(sent)[i];
        chosen_before_[i] = slot(sent - 1)[i];
    }
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        store_chosen(i, wide::load(chosen_before_ + i), wide::load(chosen_after_ + i));
    });
}

} // namespace windage
