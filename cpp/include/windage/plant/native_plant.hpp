// A stock plant written in C++: one pass over the block for each stage of the integrator. A whole step for one pack at
// a time would keep the state in registers but wait for one slow function after the other, while those of neighbouring
// packs overlap (measured: 1.4 times the time).
//
// `Drive` names the plant: `states`, `numbers` and `disturbances` are its counts, and
//     static void derive(wide* n)                       turns the numbers into what the equations need, once a block
//     explicit Drive(const wide* n)                     reads what `derive` left
//     void operator()(x, dx, u, w) const                writes x' = f(x, u, w)
#pragma once

#include <array>
#include <stdexcept>

#include <windage/plant/ode_plant.hpp>

namespace windage {

template <class Drive> class native_plant final : public ode_plant {
public:
    native_plant(const plant_description& d, const integration_settings& settings, const plant_timing& timing,
                 const plant_disturbances& w, signal_arena& arena)
        : ode_plant(checked(d, w), settings, timing, w, false, arena), output_state_(d.output_state) {
        for (const number& n : d.numbers) numbers_.emplace_back(n, arena);
        for (signal& s : derived_) s = arena.take();
    }

    void evaluate_output(constant_signal, constant_signal) override {}
    constant_signal output() const override { return x_[output_state_]; }

private:
    constant_signal output_between(constant_signal, const std::vector<constant_signal>&) override { return output(); }
    static const plant_description& checked(const plant_description& d, const plant_disturbances& w) {
        const bool fits = int(d.states.size()) == Drive::states && int(d.numbers.size()) == Drive::numbers &&
                          w.count() <= Drive::disturbances && d.output_state >= 0 && d.output_state < Drive::states;
        if (!fits) throw std::invalid_argument("plant: a stock plant was given the wrong count of numbers or states");
        return d;
    }

    void begin_plant(const trial_block& block) override {
        for (lane_value& n : numbers_) n.begin(block);
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            wide n[Drive::numbers];
            for (int k = 0; k < Drive::numbers; ++k) n[k] = numbers_[k].pack_at(i);
            Drive::derive(n);
            for (int k = 0; k < Drive::numbers; ++k) n[k].store(derived_[k] + i);
        });
    }

    WINDAGE_INLINE Drive drive_at(std::size_t i) const {
        wide n[Drive::numbers];
        for (int k = 0; k < Drive::numbers; ++k) n[k] = wide::load(derived_[k] + i);
        return Drive(n);
    }

    void derivative(const block_state& x, block_state& dx, const stage& s) override {
        for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
            std::array<wide, Drive::states> here, rate;
            for (int k = 0; k < Drive::states; ++k) here[k] = wide::load(x[k] + i);
            drive_at(i)(here, rate, wide::load((has_lag_ ? x[states_] : s.command) + i), acting(s, i).data());
            const wide h = wide::load(s.step + i);
            for (int k = 0; k < Drive::states; ++k) (rate[k] * h).store(dx[k] + i);
        });
    }

    static WINDAGE_INLINE std::array<wide, Drive::disturbances> acting(const stage& s, std::size_t i) {
        std::array<wide, Drive::disturbances> w;
        for (std::size_t k = 0; k < Drive::disturbances; ++k)
            w[k] = k < s.disturbances.size() ? wide::load(s.disturbances[k] + i) : wide(0.0);
        return w;
    }

    int output_state_;
    std::vector<lane_value> numbers_;
    std::array<signal, Drive::numbers> derived_;
};

} // namespace windage
