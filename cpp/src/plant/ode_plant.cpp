#include <windage/plant/ode_plant.hpp>

#include <algorithm>
#include <stdexcept>
#include <string>

namespace windage {
namespace {

// Distinct abscissae of the stages, and which of them each stage uses.
void tableau(integrator_kind kind, std::vector<double>& abscissae, std::vector<int>& stages) {
    switch (kind) {
    case integrator_kind::euler:
        abscissae = {0.0};
        stages = {0};
        return;
    case integrator_kind::rk4:
        abscissae = {0.0, 0.5, 1.0};
        stages = {0, 1, 1, 2};
        return;
    case integrator_kind::cash_karp5:
    case integrator_kind::reference: // Cash & Karp 1990, ACM TOMS 16(3) 201-222
        abscissae = {0.0, 1.0 / 5.0, 3.0 / 10.0, 3.0 / 5.0, 1.0, 7.0 / 8.0};
        stages = {0, 1, 2, 3, 4, 5};
        return;
    }
}

} // namespace

ode_plant::ode_plant(const plant_description& d, const integration_settings& settings, const plant_timing& timing,
                     const plant_disturbances& w, bool reads_time, signal_arena& arena)
    : size_(arena.block_size()), states_(int(d.states.size())), has_lag_(!settings.lag.is_constant(0.0)),
      integrator_(settings.kind), x_(d.states.size() + (has_lag_ ? 1 : 0), arena.block_size()),
      inverse_lag_(settings.lag.is_constant(), arena), w_(w), tolerance_(settings.tolerance), timing_(timing),
      reads_time_(reads_time), lag_(settings.lag, arena), plan_(settings.steps_per_sample, timing, arena) {
    if (settings.steps_per_sample < 1)
        throw std::invalid_argument("steps_per_sample is " + std::to_string(settings.steps_per_sample) +
                                    "; expected at least 1");
    if (d.initial_state.size() != d.states.size())
        throw std::invalid_argument("plant: " + std::to_string(d.initial_state.size()) + " initial states for " +
                                    std::to_string(d.states.size()) + " states");
    for (const number& n : d.initial_state) initial_state_.emplace_back(n, arena);
    tableau(settings.kind, abscissae_, stage_buffer_);
    const std::size_t buffers = reads_time || !w.are_held() ? abscissae_.size() : 0;
    for (std::size_t c = 0; c < buffers; ++c) {
        stage_time_.push_back(arena.take());
        stage_values_.emplace_back();
        for (int i = 0; i < w.count(); ++i) stage_values_[c].push_back(arena.take());
    }
    if (!w.are_held() || timing.probe) {
        piece_ = block_state(4, size_);
        kept_ = x_;
    }
    if (timing.probe) probe_ = block_state(2 + std::size_t(w.count()), size_);
    stages_.resize(stage_buffer_.size());
    for (stage& s : stages_) s.disturbances.resize(w.count());
}

void ode_plant::begin(const trial_block& block, const held_value& initial_command) {
    for (std::size_t i = 0; i < initial_state_.size(); ++i) {
        initial_state_[i].begin(block);
        initial_state_[i].copy_to(x_[i], size_);
    }
    if (has_lag_) {
        lag_.begin(block);
        inverse_lag_.fill([&](std::size_t i) { return 1.0 / lag_.pack_at(i); });
        initial_command.copy_to(x_[states_], size_);
    }
    plan_.begin();
    begin_plant(block);
}

void ode_plant::advance(const sample_interval& interval) {
    find_moving();
    if (timing_.probe) set_probes(interval.time);
    if (integrator_ == integrator_kind::reference) return advance_reference(interval);
    const bool may_be_in_pieces = w_.break_soon() || timing_.probe;
    for (int j = 0; j < plan_.steps(); ++j) {
        plan_.prepare(j, interval, needs_times() || may_be_in_pieces);
        if (may_be_in_pieces && take_step_in_pieces()) continue;
        prepare_stages(plan_.start(), plan_.step(), false);
        take_step(stages_);
        if (timing_.probe) probe(plan_.start(), piece_[3]);
    }
}

void ode_plant::set_probes(constant_signal time) {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide after = timing_.probe->pack_at(i);
        select(after > 0.0, wide::load(time + i) + after, -0x1p1000).store(probe_[0] + i);
    });
}

// The end of a piece: a break of a disturbance, the instant of the probe, or the end of the step.
bool ode_plant::piece_end(constant_signal from, constant_signal end, signal until) {
    bool is_found = w_.break_soon() && w_.piece_end(from, end, until);
    if (!is_found) std::copy_n(end, size_, until);
    if (!timing_.probe) return is_found;
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide at = wide::load(probe_[0] + i), close = 0.5 * same_instant * timing_.period.pack_at(i);
        const auto is_inside = (wide::load(from + i) < at - close) & (at < wide::load(until + i) - close);
        select(is_inside, at, wide::load(until + i)).store(until + i);
        is_found = is_found || any(is_inside);
    });
    return is_found;
}

// Reads the output in the lanes whose probe is the end of the piece that has just been taken.
void ode_plant::probe(constant_signal from, constant_signal until) {
    const auto is_reached = [&](std::size_t i) {
        const wide earliest = wide::load(probe_[0] + i) - 0.5 * same_instant * timing_.period.pack_at(i);
        return (wide::load(from + i) < earliest) & (wide::load(until + i) >= earliest);
    };
    bool is_any = false;
    for_each_pack(size_, [&](std::size_t i) { is_any = is_any || any(is_reached(i)); });
    if (!is_any) return;
    at_probe_.resize(std::size_t(w_.count()));
    for (std::size_t k = 0; k < at_probe_.size(); ++k) at_probe_[k] = w_.now(int(k));
    for (int k : moving_) {
        w_.evaluate(k, probe_[0], false, probe_[2 + std::size_t(k)], true);
        at_probe_[std::size_t(k)] = probe_[2 + std::size_t(k)];
    }
    const constant_signal y = output_between(probe_[0], at_probe_);
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        select(is_reached(i), wide::load(y + i), wide::load(probe_[1] + i)).store(probe_[1] + i);
    });
}

// False, and nothing done, if no lane has a break in this step.
bool ode_plant::take_step_in_pieces() {
    const signal until = piece_[1], length = piece_[2], end = piece_[3];
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        (wide::load(plan_.start() + i) + wide::load(plan_.step() + i)).store(end + i);
    });
    if (!piece_end(plan_.start(), end, until)) return false;
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide to = wide::load(until + i);
        select(to < wide::load(end + i), to - wide::load(plan_.start() + i), wide::load(plan_.step() + i))
            .store(length + i);
    });
    prepare_stages(plan_.start(), length, true);
    take_step(stages_);
    if (timing_.probe) probe(plan_.start(), until);
    take_rest_of_step();
    restore_common_times();
    return true;
}

// Lanes whose step is done take pieces of length zero, of which nothing is kept.
void ode_plant::take_rest_of_step() {
    const signal from = piece_[0], until = piece_[1], length = piece_[2], end = piece_[3];
    for (bool is_left = true; is_left;) {
        std::copy_n(until, size_, from);
        is_left = piece_end(from, end, until);
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            (wide::load(until + i) - wide::load(from + i)).store(length + i);
        });
        std::copy_n(x_.data(), x_.size(), kept_.data());
        prepare_stages(from, length, true);
        take_step(stages_);
        for (std::size_t s = 0; s < x_.signals(); ++s)
            for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
                const auto is_done = wide::load(from + i) >= wide::load(end + i);
                select(is_done, wide::load(kept_[s] + i), wide::load(x_[s] + i)).store(x_[s] + i);
            });
        if (timing_.probe) probe(from, until);
    }
}

// A function of common times is written anew only where its first lane changes: make the others the same again.
void ode_plant::restore_common_times() {
    for (const auto& values : stage_values_)
        for (int k : moving_) std::fill_n(values[k], size_, values[k][0]);
}

void ode_plant::find_moving() {
    moving_.clear();
    for (int k = 0; k < w_.count(); ++k)
        if (!w_.holds(k)) moving_.push_back(k);
}

void ode_plant::prepare_stages(constant_signal start, constant_signal length, bool own_times) {
    if (needs_times())
        for (std::size_t c = 0; c < abscissae_.size(); ++c) {
            const double fraction = abscissae_[c];
            for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
                (wide::load(start + i) + fraction * wide::load(length + i)).store(stage_time_[c] + i);
            });
            for (int k : moving_) w_.evaluate(k, stage_time_[c], fraction == 1.0, stage_values_[c][k], own_times);
        }
    for (std::size_t s = 0; s < stages_.size(); ++s) {
        stage& here = stages_[s];
        here.step = length;
        here.command = plan_.command();
        here.time = needs_times() ? stage_time_[stage_buffer_[s]] : nullptr;
        for (int k = 0; k < w_.count(); ++k) here.disturbances[k] = w_.now(k);
        for (int k : moving_) here.disturbances[k] = stage_values_[stage_buffer_[s]][k];
    }
}

void ode_plant::full_derivative(const block_state& x, block_state& dx, const stage& s) {
    derivative(x, dx, s);
    if (!has_lag_) return;
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide lag_rate = (wide::load(s.command + i) - wide::load(x[states_] + i)) * inverse_lag_.pack_at(i);
        (lag_rate * wide::load(s.step + i)).store(dx[states_] + i);
    });
}

void ode_plant::take_step(const std::vector<stage>& stages) {
    begin_step(x_, stages.front());
    std::size_t next = 0; // odeint asks for the stages in their order
    auto system = [&](const block_state& x, block_state& dx, double) { full_derivative(x, dx, stages[next++]); };
    if (integrator_ == integrator_kind::euler) euler_.do_step(system, x_, 0.0, 1.0);
    if (integrator_ == integrator_kind::rk4) rk4_.do_step(system, x_, 0.0, 1.0);
    if (integrator_ == integrator_kind::cash_karp5) cash_karp_.do_step(system, x_, 0.0, 1.0);
}

void ode_plant::advance_reference(const sample_interval& interval) {
    block_state buffer(3, size_);
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide fraction = timing_.is_split ? timing_.fraction.pack_at(i) : wide(0.0);
        fraction.store(buffer[0] + i);
        (timing_.period.pack_at(i) - fraction).store(buffer[1] + i);
        (wide::load(interval.time + i) + fraction).store(buffer[2] + i);
    });
    if (timing_.is_split) integrate_pieces(interval.time, buffer[0], interval.before);
    integrate_pieces(buffer[2], buffer[1], interval.after);
}

void ode_plant::integrate_pieces(constant_signal start, constant_signal length, constant_signal command) {
    if (!w_.break_soon() && !timing_.probe) return integrate_reference(start, length, command);
    block_state piece(4, size_);
    const signal from = piece[0], until = piece[1], whole = piece[2], end = piece[3];
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        wide::load(start + i).store(from + i);
        (wide::load(start + i) + wide::load(length + i)).store(end + i);
    });
    for (bool is_left = true; is_left; std::copy_n(until, size_, from)) {
        is_left = piece_end(from, end, until);
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            (wide::load(until + i) - wide::load(from + i)).store(whole + i);
        });
        integrate_reference(from, whole, command);
        if (timing_.probe) probe(from, until);
    }
}

// Steps are halved and doubled, never scaled by a computed power, so that the digits of the audit are the same on
// every machine. All lanes hold the same trial; the first one steers.
void ode_plant::integrate_reference(constant_signal start, constant_signal length, constant_signal command) {
    if (!(length[0] > 0.0)) return;
    stage here;
    here.step = length;
    here.command = command;
    for (int k = 0; k < w_.count(); ++k) here.disturbances.push_back(w_.now(k));
    find_moving();
    begin_step(x_, here);
    auto system = [&](const block_state& x, block_state& dx, double tau) {
        if (needs_times()) {
            for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
                (wide::load(start + i) + tau * wide::load(length + i)).store(stage_time_[0] + i);
            });
            here.time = stage_time_[0];
            for (int k : moving_) {
                w_.evaluate(k, stage_time_[0], tau == 1.0, stage_values_[0][k]);
                here.disturbances[k] = stage_values_[0][k];
            }
        }
        full_derivative(x, dx, here);
    };
    block_state next(x_.signals(), size_), error(x_.signals(), size_);
    // Steps below 2^-14 of the interval mean a right-hand side that chatters: no step is small enough for it.
    constexpr int finest = 14;
    std::int64_t done = 0, whole = std::int64_t(1) << finest, step = whole;
    while (done < whole) {
        const double scale = 1.0 / double(whole);
        cash_karp_.do_step(system, x_, double(done) * scale, next, double(step) * scale, error);
        double worst = 0.0;
        for (std::size_t s = 0; s < x_.signals(); ++s) {
            const double e = error[s][0] < 0 ? -error[s][0] : error[s][0];
            const double size = x_[s][0] < 0 ? -x_[s][0] : x_[s][0];
            worst = std::max(worst, e / (tolerance_ * (size + 1e-3)));
        }
        if (worst > 1.0 && step > 1) {
            step /= 2;
            continue;
        }
        done += step;
        std::copy_n(next.data(), x_.size(), x_.data());
        if (worst < 0.01 && done % (2 * step) == 0 && done + 2 * step <= whole) step *= 2;
    }
}

} // namespace windage
