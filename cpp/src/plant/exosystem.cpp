#include <windage/plant/exosystem.hpp>

#include <algorithm>

namespace windage {

exosystem::exosystem(const plant_disturbances& w, signal_arena& arena) : w_(w), size_(arena.block_size()) {
    for (int k = 0; k < w.count(); ++k) {
        for (int term = 0; term < w.terms(k) && !w.is_zero(k); ++term) {
            part p{k, term, columns_, w.motion(k, term), {}, {}, {}};
            columns_ += 1 + p.motion.derivatives;
            all_held_ = all_held_ && p.motion.derivatives == 0;
            if (!w.is_held(k))
                for (auto* values : {&p.start, &p.before, &p.after})
                    for (int d = 0; d <= p.motion.derivatives; ++d) values->push_back(arena.take());
            parts_.push_back(std::move(p));
        }
    }
}

bool exosystem::is_same() const {
    return std::all_of(parts_.begin(), parts_.end(), [](const part& p) {
        return !p.motion.angular_frequency || p.motion.angular_frequency->is_same();
    });
}

// Derivatives are counted in powers of a rate, so that S is as large as it has to be: v_d = w^(d) / rate^d.
exosystem::units exosystem::units_of(const part& p, wide period, std::size_t i) const {
    const wide slow = 0.5 / period;
    if (!p.motion.angular_frequency) return {slow, 0.0};
    const wide omega = p.motion.angular_frequency->pack_at(i), rate = maximum(omega, slow);
    return {rate, -omega * (omega / rate)};
}

step_matrices exosystem::step(const linear_model& m, wide h, wide period, std::size_t i) const {
    const int n = m.a.rows();
    drive v{lane_matrix(n, columns_), all_held_ ? lane_matrix() : lane_matrix(columns_, columns_)};
    for (int r = 0; r < n; ++r) v.g(r, 0) = m.b(r, 0);
    for (const part& p : parts_) {
        for (int r = 0; r < n; ++r) v.g(r, p.column) = m.e(r, p.which);
        if (p.motion.derivatives == 0) continue;
        const units u = units_of(p, period, i);
        for (int d = 0; d < p.motion.derivatives; ++d) v.s(p.column + d, p.column + d + 1) = u.rate;
        if (p.motion.angular_frequency) v.s(p.column + 2, p.column + 1) = u.closing;
    }
    step_matrices step = transition(m.a, m.a_low, v, h);
    for (const part& p : parts_) {
        const wide rate = units_of(p, period, i).rate;
        wide power = 1.0;
        for (int d = 1; d <= p.motion.derivatives; ++d) {
            power *= rate;
            for (int r = 0; r < n; ++r) step.gamma(r, p.column + d) = step.gamma(r, p.column + d) / power;
        }
    }
    return step;
}

lane_matrix exosystem::held(const lane_matrix& gamma) const {
    lane_matrix values(gamma.rows(), 1 + int(parts_.size()));
    for (int r = 0; r < gamma.rows(); ++r) {
        values(r, 0) = gamma(r, 0);
        for (std::size_t k = 0; k < parts_.size(); ++k) values(r, 1 + int(k)) = gamma(r, parts_[k].column);
    }
    return values;
}

const std::vector<exosystem::input>& exosystem::at_start(constant_signal time) {
    inputs_.clear();
    for (part& p : parts_) {
        if (p.term == 0) inputs_.push_back({p.column, w_.now(p.which)}); // values act alike: that of the whole sum
        if (p.motion.derivatives == 0 || w_.holds(p.which)) continue;
        w_.evaluate_motion(p.which, p.term, time, p.start.data());
        for (int d = 1; d <= p.motion.derivatives; ++d) inputs_.push_back({p.column + d, p.start[std::size_t(d)]});
    }
    return inputs_;
}

const std::vector<exosystem::input>& exosystem::jumps_at(constant_signal time) {
    inputs_.clear();
    for (part& p : parts_) {
        if (w_.holds(p.which)) continue;
        w_.evaluate_motion_at_own_times(p.which, p.term, time, true, p.before.data());
        w_.evaluate_motion_at_own_times(p.which, p.term, time, false, p.after.data());
        for (int d = 0; d <= p.motion.derivatives; ++d) {
            const signal jump = p.after[std::size_t(d)], before = p.before[std::size_t(d)];
            for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
                (wide::load(jump + i) - wide::load(before + i)).store(jump + i);
            });
            inputs_.push_back({p.column + d, jump});
        }
    }
    return inputs_;
}

} // namespace windage
