#include <windage/loop/sampled_noise.hpp>

#include <stdexcept>

#include <windage/lanes/elementary.hpp>

namespace windage {
namespace {

std::vector<lane_value> lane_values(const noise_description& d, signal_arena& arena) {
    if (d.numbers.size() != (d.kind == noise_kind::white ? 1u : 2u))
        throw std::invalid_argument("noise: the wrong count of numbers");
    std::vector<lane_value> values;
    for (const number& n : d.numbers) values.emplace_back(n, arena);
    return values;
}

bool keeps_the_same(const noise_description& d, const sample_clock& clock, const std::vector<lane_value>& numbers) {
    return d.kind == noise_kind::white || are_same(clock.period(), numbers[1]);
}

} // namespace

sampled_noise::sampled_noise(const noise_description& d, const sample_clock& clock, signal_arena& arena)
    : kind_(d.kind), clock_(clock), size_(arena.block_size()), numbers_(lane_values(d, arena)), noise_(d.stream, arena),
      now_(arena.take()), keep_(keeps_the_same(d, clock, numbers_), arena),
      gain_(keep_.is_same() && are_same(clock.period(), numbers_[0]), arena) {}

void sampled_noise::begin(const trial_block& block) {
    for (lane_value& n : numbers_) n.begin(block);
    noise_.begin(block);
    if (kind_ == noise_kind::gauss_markov) return begin_gauss_markov();
    keep_.fill([&](std::size_t) { return 0.0; });
    gain_.fill([&](std::size_t i) { return square_root(numbers_[0].pack_at(i) / clock_.period().pack_at(i)); });
}

// Exact sampling of dw/dt = -w/T + noise with stationary standard deviation sigma (Gelb 1974, Applied Optimal
// Estimation, section 3.8, from memory): w_{k+1} = exp(-Ts/T) w_k + sigma sqrt(1 - exp(-2 Ts/T)) n_k.
void sampled_noise::begin_gauss_markov() {
    const auto ratio = [&](std::size_t i) { return clock_.period().pack_at(i) / numbers_[1].pack_at(i); };
    keep_.fill([&](std::size_t i) { return exponential(-ratio(i)); });
    gain_.fill(
        [&](std::size_t i) { return numbers_[0].pack_at(i) * square_root(-exponential_minus_one(-2.0 * ratio(i))); });
}

void sampled_noise::sample(std::int64_t k) {
    const constant_signal n = noise_.sample(k);
    const bool starts_stationary = k == 0 && kind_ == noise_kind::gauss_markov;
    const auto move_on = [&](std::size_t i, wide keep, wide gain, wide deviation) WINDAGE_LANE_LOOP {
        const wide draw = wide::load(n + i);
        const wide w = starts_stationary ? deviation * draw : keep * wide::load(now_ + i) + gain * draw;
        w.store(now_ + i);
    };
    for_each_pack_with(size_, move_on, keep_, gain_, numbers_[0]);
}

} // namespace windage
