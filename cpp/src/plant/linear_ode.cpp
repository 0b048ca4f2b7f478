#include <windage/plant/linear_ode.hpp>

#include <windage/plant/balancing.hpp>
#include <windage/plant/refused_trial.hpp>

namespace windage {
namespace {

constexpr double fastest = 0x1p14; // rate times sample period that explicit steps can follow

const plant_description& checked(const plant_description& d) {
    check_linear(d);
    return d;
}

} // namespace

linear_ode::linear_ode(const plant_description& d, const integration_settings& settings, const plant_timing& timing,
                       const plant_disturbances& w, signal_arena& arena)
    : ode_plant(checked(d), settings, timing, w, false, arena), d_(d), timing_(timing), w_count_(w.count()),
      a_(states_, states_, false, arena), b_(states_, 1, false, arena), e_(states_, w_count_, false, arena),
      c_(1, states_, false, arena), unit_(states_, 1, false, arena), output_(arena.take()) {
    check_linear_disturbances(d, w_count_);
    for (const number& n : d.numbers) numbers_.emplace_back(n, arena);
    for (int i = 0; i < states_; ++i) shown_.push_back(arena.take());
}

void linear_ode::begin_plant(const trial_block& block) {
    for (lane_value& n : numbers_) n.begin(block);
    for (std::size_t i = 0; i < size_; i += lanes) {
        std::vector<wide> numbers;
        for (const lane_value& n : numbers_) numbers.push_back(n.pack_at(i));
        balance(realise(d_, numbers), timing_.period.pack_at(i), i, block);
    }
    show_states();
}

// Balanced units leave one factor open: the state that the output sees most is counted in units of the output.
void linear_ode::balance(const linear_model& m, wide period, std::size_t i, const trial_block& block) {
    lane_matrix unit = balanced_units(m.a);
    wide seen = 0.0, norm = 0.0;
    for (int r = 0; r < states_; ++r) seen = maximum(seen, absolute(m.c(0, r) * unit(r, 0)));
    seen = select(seen > 0.0, seen, 1.0);
    for (int r = 0; r < states_; ++r) unit(r, 0) = unit(r, 0) / seen;
    for (int r = 0; r < states_; ++r) {
        wide sum = 0.0;
        for (int k = 0; k < states_; ++k) {
            const wide entry = m.a(r, k) * (unit(k, 0) / unit(r, 0));
            sum += absolute(entry);
            a_.set(r, k, i, entry);
        }
        norm = maximum(norm, sum);
        b_.set(r, 0, i, m.b(r, 0) / unit(r, 0));
        for (int k = 0; k < w_count_; ++k) e_.set(r, k, i, m.e(r, k) / unit(r, 0));
        c_.set(0, r, i, m.c(0, r));
        unit_.set(r, 0, i, unit(r, 0));
        (wide::load(x_[std::size_t(r)] + i) / unit(r, 0)).store(x_[std::size_t(r)] + i);
    }
    for (int lane = 0; lane < lanes; ++lane)
        if (norm[lane] * period[lane] > fastest)
            throw refused_trial(block, i + std::size_t(lane),
                                "is too fast for the reference integration: it cannot be audited");
}

void linear_ode::advance(const sample_interval& interval) {
    ode_plant::advance(interval);
    show_states();
}

void linear_ode::show_states() {
    for (int r = 0; r < states_; ++r)
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            (unit_.pack_at(r, 0, i) * wide::load(x_[std::size_t(r)] + i)).store(shown_[std::size_t(r)] + i);
        });
}

void linear_ode::evaluate_output(constant_signal, constant_signal) {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        wide y = 0.0;
        for (int r = 0; r < states_; ++r) y += c_.pack_at(0, r, i) * wide::load(shown_[std::size_t(r)] + i);
        y.store(output_ + i);
    });
}

void linear_ode::derivative(const block_state& x, block_state& dx, const stage& s) {
    const constant_signal input = has_lag_ ? x[std::size_t(states_)] : s.command;
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        const wide u = wide::load(input + i), h = wide::load(s.step + i);
        for (int r = 0; r < states_; ++r) {
            wide rate = b_.pack_at(r, 0, i) * u;
            for (int k = 0; k < w_count_; ++k)
                rate += e_.pack_at(r, k, i) * wide::load(s.disturbances[std::size_t(k)] + i);
            for (int k = 0; k < states_; ++k) rate += a_.pack_at(r, k, i) * wide::load(x[std::size_t(k)] + i);
            (rate * h).store(dx[std::size_t(r)] + i);
        }
    });
}

} // namespace windage
