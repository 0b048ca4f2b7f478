// Loop (d), one trial at a time in plain C++.
#include "constants.hpp"
#include "scalar.hpp"

#include <array>

namespace {

namespace c = constants;
using state = std::array<double, 5>; // motor angle, motor speed, load angle, load speed, torque

struct servo {
    double inverse_motor, inverse_load, stiffness, damping, inverse_current_time, gain, coulomb, breakaway, viscous,
        cogging, phase, load_torque, delay;

    state derivative(const state& x, double command, double load) const {
        const double shaft = stiffness * (x[0] - x[2]) + damping * (x[1] - x[3]);
        const double ratio = x[3] * (1.0 / c::stribeck_speed);
        const double friction =
            (coulomb + breakaway * std::exp(-ratio * ratio)) * std::tanh(x[3] * (1.0 / c::smoothing)) + viscous * x[3];
        const double cog = cogging * std::sin(c::cogging_periods * x[0] + phase);
        return {x[1], (gain * x[4] - shaft + cog) * inverse_motor, x[3], (shaft - friction - load) * inverse_load,
                (command - x[4]) * inverse_current_time};
    }

    void step(state& x, double h, double command, double load) const {
        const auto moved = [&](const state& k, double by) {
            state y;
            for (int i = 0; i < 5; ++i) y[i] = x[i] + by * k[i];
            return y;
        };
        const state k1 = derivative(x, command, load), k2 = derivative(moved(k1, 0.5 * h), command, load);
        const state k3 = derivative(moved(k2, 0.5 * h), command, load), k4 = derivative(moved(k3, h), command, load);
        for (int i = 0; i < 5; ++i) x[i] += h / 6.0 * (k1[i] + 2.0 * k2[i] + 2.0 * k3[i] + k4[i]);
    }
};

// Time from the window's start until |error| stays within the tolerance; the last crossing is interpolated.
struct settling {
    double start, since = 0.0, deviation_before = 0.0, time_before = 0.0;

    void add(double time, double deviation) {
        time -= start;
        if (!(deviation <= c::settle_tolerance)) {
            since = INFINITY;
        } else if (since == INFINITY) {
            const double part = (deviation_before - c::settle_tolerance) / (deviation_before - deviation);
            since = time_before + (time - time_before) * part;
        }
        deviation_before = deviation;
        time_before = time;
    }
};

template <bool Noise> void simulate_trial(const servo& p, normal_numbers<Noise>& normal, const double* reference,
                                          long samples, double* measures) {
    constexpr double ts = c::sample_period, k1 = c::controller_bandwidth * c::controller_bandwidth,
                     k2 = 2.0 * c::controller_bandwidth, moved = c::move_start + c::move_time;
    const auto at = [](double time) { return long(time / ts + 0.5); };
    const long move_from = at(c::move_start), move_to = at(moved);
    const long loaded_from = at(c::loaded), still_from = at(c::standstill);
    const double *speed = reference + samples, *acceleration = reference + 2 * samples;
    const long whole = std::lround(p.delay / ts);
    constexpr int steps = int(c::steps);

    extended_observer observer(c::observer_bandwidth, ts);
    state x{};
    double u[3] = {0.0, 0.0, 0.0}, following = 0.0, loaded = 0.0, first_command = 0.0, sum = 0.0, squares = 0.0;
    settling settled{moved};
    for (long k = 0; k < samples; ++k) {
        const double time = double(k) * ts, error = reference[k] - x[0];
        const double measured = quantise(x[0] + c::noise * normal(), c::resolution);
        observer.update(measured, c::b0 * u[0]);
        const double wanted =
            (k1 * (reference[k] - observer.x1) + k2 * (speed[k] - observer.x2) + acceleration[k] - observer.x3) / c::b0;
        u[2] = u[1];
        u[1] = u[0];
        u[0] = std::clamp(wanted, -c::limit, c::limit);

        if (k >= move_from && k <= move_to) following = std::max(following, std::abs(error));
        if (k >= move_to && k <= loaded_from) settled.add(time, std::abs(error));
        if (k >= loaded_from) loaded = std::max(loaded, std::abs(error));
        if (k >= still_from && k <= loaded_from) {
            if (k == still_from) first_command = u[0];
            const double deviation = u[0] - first_command;
            sum += deviation;
            squares += deviation * deviation;
        }
        if (k + 1 == samples) break;
        constexpr double h = ts / steps;
        for (int j = 0; j < steps; ++j) p.step(x, h, u[whole], k >= loaded_from ? p.load_torque : 0.0);
    }
    const double count = double(loaded_from - still_from + 1), mean = sum / count;
    const double m[4] = {following, settled.since, loaded, std::sqrt(std::max(squares / count - mean * mean, 0.0))};
    std::copy_n(m, 4, measures);
}

template <bool Noise> void simulate_all(const double* parameters, long trials, const double* reference, long samples,
                                        double* measures, int threads, std::uint64_t seed) {
    divide_trials(trials, threads, [=](long first, long last, int worker) {
        normal_numbers<Noise> normal(seed + std::uint64_t(worker));
        for (long t = first; t < last; ++t) {
            const auto p = [&](int i) { return parameters[i * trials + t]; };
            const double resonance = std::sqrt(p(2) * (p(0) + p(1)) / (p(0) * p(1)));
            const servo s{1.0 / p(0), 1.0 / p(1), p(2),  2.0 * p(3) * p(2) / resonance,
                          1.0 / p(4), p(5),       p(6),  (p(7) - 1.0) * p(6),
                          p(8),       p(9),       p(10), p(11),
                          p(12)};
            double m[4];
            simulate_trial(s, normal, reference, samples, m);
            for (int i = 0; i < 4; ++i) measures[i * trials + t] = m[i];
        }
    });
}

} // namespace

extern "C" void simulate(const double* parameters, long trials, const double* reference, long samples, double* measures,
                         int threads, std::uint64_t seed, int with_noise) {
    with_noise ? simulate_all<true>(parameters, trials, reference, samples, measures, threads, seed)
               : simulate_all<false>(parameters, trials, reference, samples, measures, threads, seed);
}
