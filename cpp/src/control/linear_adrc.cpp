#include <windage/control/linear_adrc.hpp>

#include <algorithm>
#include <stdexcept>
#include <string>

#include <windage/control/gains.hpp>
#include <windage/control/observer.hpp>

namespace windage {
namespace {

void check(const controller_description& d) {
    const auto refuse = [](const std::string& text) { throw std::invalid_argument("controller: " + text); };
    if (d.order < 1 || d.order > max_order)
        refuse("order is " + std::to_string(d.order) + "; expected 1 to " + std::to_string(max_order));
    if (!d.controller_gains.empty() && int(d.controller_gains.size()) != d.order)
        refuse("controller_gains has " + std::to_string(d.controller_gains.size()) + " numbers; expected " +
               std::to_string(d.order) + ", one a state");
    if (!d.observer_gains.empty() && int(d.observer_gains.size()) != d.order + 1)
        refuse("observer_gains has " + std::to_string(d.observer_gains.size()) + " numbers; expected " +
               std::to_string(d.order + 1) + ", one a state and one for the total disturbance");
    if (d.reference_derivatives > d.order)
        refuse("reference_derivatives is " + std::to_string(d.reference_derivatives) + "; expected at most the order");
}

bool are_all_same(const std::vector<lane_value>& values) {
    return std::all_of(values.begin(), values.end(), [](const lane_value& v) { return v.is_same(); });
}

} // namespace

linear_adrc::linear_adrc(const controller_description& d, const held_value& sample_period, signal_arena& arena)
    : d_((check(d), d)), size_(arena.block_size()), controller_bandwidth_(d.controller_bandwidth, arena),
      observer_bandwidth_(d.observer_bandwidth, arena), b0_(d.b0, arena),
      controller_factor_(d.controller_gain_factor, arena), observer_factor_(d.observer_gain_factor, arena),
      period_(sample_period), inverse_b0_(b0_.is_same(), arena), estimates_(arena.take(d.order + 1)),
      output_(arena.take()) {
    for (const number& n : d.controller_gains) given_controller_gains_.emplace_back(n, arena);
    for (const number& n : d.observer_gains) given_observer_gains_.emplace_back(n, arena);
    for (int m = 0; m <= d.order; ++m) period_powers_.emplace_back(m == 0 || sample_period.is_same(), arena);
    const bool same_controller =
        are_same(controller_bandwidth_, controller_factor_, b0_) && are_all_same(given_controller_gains_);
    const bool same_observer =
        are_same(observer_bandwidth_, observer_factor_, sample_period) && are_all_same(given_observer_gains_);
    for (int s = 0; s < d.order; ++s) controller_gains_.emplace_back(same_controller, arena);
    for (int s = 0; s <= d.order; ++s) observer_gains_.emplace_back(same_observer, arena);
}

int linear_adrc::reference_derivatives() const {
    if (d_.form == adrc_form::error) return 0;
    return d_.reference_derivatives < 0 ? d_.order : d_.reference_derivatives;
}

void linear_adrc::begin(const trial_block& block, const held_value& initial_command) {
    for (lane_value* n : {&controller_bandwidth_, &observer_bandwidth_, &b0_, &controller_factor_, &observer_factor_})
        n->begin(block);
    for (lane_value& n : given_controller_gains_) n.begin(block);
    for (lane_value& n : given_observer_gains_) n.begin(block);
    inverse_b0_.fill([&](std::size_t i) { return 1.0 / b0_.pack_at(i); });
    place_gains();
    period_powers_[0].fill([](std::size_t) { return 1.0; });
    for (int m = 1; m <= d_.order; ++m)
        period_powers_[m].fill(
            [&](std::size_t i) { return period_powers_[m - 1].pack_at(i) * period_.pack_at(i) / double(m); });
    std::fill_n(estimates_, std::size_t(d_.order + 1) * size_, 0.0);
    initial_command.copy_to(output_, size_);
}

void linear_adrc::place_gains() {
    const std::size_t controller_packs = controller_gains_[0].is_same() ? lanes : size_,
                      observer_packs = observer_gains_[0].is_same() ? lanes : size_;
    for_each_pack(controller_packs, [&](std::size_t i) {
        wide k[max_order];
        controller_gains(d_.order, controller_bandwidth_.pack_at(i), k);
        for (int s = 0; s < d_.order; ++s) {
            const wide gain = given_controller_gains_.empty() ? k[s] : given_controller_gains_[s].pack_at(i);
            controller_gains_[s].set(i, gain * controller_factor_.pack_at(i) * inverse_b0_.pack_at(i));
        }
    });
    for_each_pack(observer_packs, [&](std::size_t i) {
        wide l[max_order + 1];
        observer_gains(d_.order, d_.discretisation, observer_bandwidth_.pack_at(i), period_.pack_at(i), l);
        for (int s = 0; s <= d_.order; ++s) {
            const wide gain = given_observer_gains_.empty() ? l[s] : given_observer_gains_[s].pack_at(i);
            observer_gains_[s].set(i, gain * observer_factor_.pack_at(i));
        }
    });
}

/// The numbers of one pack of controllers.
template <int Order> struct linear_adrc::numbers {
    wide controller_gain[Order], observer_gain[Order + 1], period_power[Order + 1], b0, inverse_b0;
};

/// Reads them, all of a block at once where they are the same.
template <int Order> struct linear_adrc::number_reader {
    const linear_adrc& of;

    bool is_same() const {
        return are_same(of.controller_gains_[0], of.observer_gains_[0], of.period_powers_[Order], of.b0_);
    }
    template <bool Same> WINDAGE_INLINE numbers<Order> read(std::size_t i) const {
        numbers<Order> n;
        for (int s = 0; s < Order; ++s) n.controller_gain[s] = of.controller_gains_[s].template read<Same>(i);
        for (int s = 0; s <= Order; ++s) n.observer_gain[s] = of.observer_gains_[s].template read<Same>(i);
        for (int m = 1; m <= Order; ++m) n.period_power[m] = of.period_powers_[m].template read<Same>(i);
        n.b0 = of.b0_.template read<Same>(i);
        n.inverse_b0 = of.inverse_b0_.template read<Same>(i);
        return n;
    }
};

// Output form: u = (k_1 (r - x_1) + ... + k_n (r^(n-1) - x_n) + r^(n) - x_{n+1}) / b0, where the derivatives of r that
// are not fed count as zero.
// Error form:  u = (k_1 x_1 + ... + k_n x_n + x_{n+1}) / b0.
// The gains k_i are divided by b0 beforehand.
template <int Order, adrc_form Form> WINDAGE_INLINE wide linear_adrc::command(const wide* x, const numbers<Order>& n,
                                                                              const signal* reference,
                                                                              std::size_t i) const {
    constexpr bool error_form = Form == adrc_form::error;
    const int fed = error_form ? 0 : reference_derivatives();
    wide u = 0.0;
    for (int s = 0; s < Order; ++s) {
        wide deviation = error_form ? x[s] : -x[s];
        if (!error_form && s <= fed) deviation = wide::load(reference[s] + i) - x[s];
        const wide share = n.controller_gain[s] * deviation;
        u = s == 0 ? share : u + share;
    }
    if (!error_form && fed == Order) u += n.inverse_b0 * wide::load(reference[Order] + i);
    if (!d_.cancel_disturbance) return u;
    return error_form ? u + n.inverse_b0 * x[Order] : u - n.inverse_b0 * x[Order];
}

template <int Order, adrc_form Form, bool StartsMeasured>
void linear_adrc::sample_form(const signal* reference, constant_signal measured, constant_signal fed) {
    constexpr bool error_form = Form == adrc_form::error;
    const bool holds = d_.discretisation == discretisation_kind::zero_order_hold;
    const auto sample_pack = [&](std::size_t i, const numbers<Order>& n) WINDAGE_LANE_LOOP {
        wide x[Order + 1];
        for (int s = 0; s <= Order; ++s) x[s] = wide::load(estimates_ + s * size_ + i);
        // In the error form the observer follows e = r - y, which the command drives with the opposite sign.
        const wide followed =
            error_form ? wide::load(reference[0] + i) - wide::load(measured + i) : wide::load(measured + i);
        const wide drive = n.b0 * wide::load(fed + i);
        if constexpr (StartsMeasured) {
            x[0] = followed;
            x[Order] = error_form ? drive : -drive; // at rest under the initial command
        } else {
            const wide top = error_form ? x[Order] - drive : x[Order] + drive;
            holds ? predict_zero_order_hold<Order>(x, top, n.period_power)
                  : predict_euler<Order>(x, top, n.period_power[1]);
        }
        correct<Order>(x, followed, n.observer_gain);
        for (int s = 0; s <= Order; ++s) x[s].store(estimates_ + s * size_ + i);
        settled(command<Order, Form>(x, n, reference, i)).store(output_ + i);
    };
    for_each_pack_with(size_, sample_pack, number_reader<Order>{*this});
}

template <int Order>
void linear_adrc::sample_order(std::int64_t k, const signal* reference, constant_signal measured, constant_signal fed) {
    const bool starts_measured = k == 0 && d_.observer_start == observer_start_kind::measured;
    if (d_.form == adrc_form::error)
        starts_measured ? sample_form<Order, adrc_form::error, true>(reference, measured, fed)
                        : sample_form<Order, adrc_form::error, false>(reference, measured, fed);
    else
        starts_measured ? sample_form<Order, adrc_form::output, true>(reference, measured, fed)
                        : sample_form<Order, adrc_form::output, false>(reference, measured, fed);
}

void linear_adrc::sample(std::int64_t k, const signal* reference, constant_signal measured, constant_signal applied) {
    const constant_signal fed = d_.observer_input == observer_input_kind::limited ? applied : output_;
    switch (d_.order) {
    case 1: return sample_order<1>(k, reference, measured, fed);
    case 2: return sample_order<2>(k, reference, measured, fed);
    case 3: return sample_order<3>(k, reference, measured, fed);
    case 4: return sample_order<4>(k, reference, measured, fed);
    case 5: return sample_order<5>(k, reference, measured, fed);
    case 6: return sample_order<6>(k, reference, measured, fed);
    case 7: return sample_order<7>(k, reference, measured, fed);
    case 8: return sample_order<8>(k, reference, measured, fed);
    }
    static_assert(max_order == 8);
}

} // namespace windage
