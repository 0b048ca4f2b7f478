#include "disturbance_bank.hpp"

#include <algorithm>
#include <limits>

namespace windage {

disturbance_bank::disturbance_bank(const std::vector<disturbance_description>& d, const sample_clock& clock,
                                   bool time_is_uniform, signal_arena& arena)
    : clock_(clock), size_(arena.block_size()), next_breaks_(size_) {
    for (const disturbance_description& w : d) all_.emplace_back(w, clock, time_is_uniform, arena);
}

void disturbance_bank::begin(const trial_block& block) {
    for (disturbance& w : all_) w.begin(block);
    next_look_ = 0;
    std::fill(next_breaks_.begin(), next_breaks_.end(), -std::numeric_limits<double>::infinity());
}

void disturbance_bank::sample(std::int64_t k) {
    for (disturbance& w : all_) w.sample(k);
    if (k >= next_look_) look_for_breaks(k);
}

bool disturbance_bank::are_held() const {
    return std::all_of(all_.begin(), all_.end(), [](const disturbance& w) { return w.is_held(); });
}

// The break that was found last is still the next one unless it has passed.
double disturbance_bank::next_break(double t, std::size_t lane) const {
    const bool is_to_come = next_breaks_[lane] > t + same_instant * clock_.period()[lane];
    return is_to_come ? next_breaks_[lane] : find_next_break(t, lane);
}

double disturbance_bank::find_next_break(double t, std::size_t lane) const {
    double earliest = std::numeric_limits<double>::infinity();
    for (const disturbance& w : all_) earliest = std::min(earliest, w.next_break(t, lane));
    return earliest;
}

// Breaks are rare: between two of them this is one comparison a sample for the whole block. What a lane does depends
// on its own breaks alone (`piece_end`); this only says when to ask.
void disturbance_bank::look_for_breaks(std::int64_t k) {
    const bool is_common = clock_.is_uniform() && std::all_of(all_.begin(), all_.end(), [](const disturbance& w) {
                               return w.has_common_breaks();
                           });
    double earliest = 1e15; // sample in whose interval the next break lies
    for (std::size_t lane = 0; lane < size_; ++lane) {
        next_breaks_[lane] = is_common && lane > 0 ? next_breaks_[0] : next_break(clock_.time()[lane], lane);
        earliest = std::min(earliest, next_breaks_[lane] / clock_.period()[lane]);
    }
    const std::int64_t sample = std::int64_t(earliest - 1e-6); // rounding of the ratio must not let it come late
    break_soon_ = sample <= k;
    next_look_ = std::max(sample, k + 1);
}

bool disturbance_bank::piece_end(constant_signal from, constant_signal end, signal until) const {
    bool is_found = false;
    for (std::size_t lane = 0; lane < size_; ++lane) {
        // Half of what makes two instants the same: a break that counts as one with the start of the next interval by
        // one rounding of it and not by another must not be met by neither.
        const double latest = end[lane] - 0.5 * same_instant * clock_.period()[lane];
        const double next = next_break(from[lane], lane);
        until[lane] = next < latest ? next : end[lane];
        is_found = is_found || next < latest;
    }
    return is_found;
}

} // namespace windage
