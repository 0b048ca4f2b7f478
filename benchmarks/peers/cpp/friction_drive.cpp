// Loop (b), one trial at a time in plain C++.
#include "constants.hpp"
#include "scalar.hpp"

namespace {

namespace c = constants;

struct drive {
    double inverse_inertia, gear, drag, coulomb, delay, intensity;

    double acceleration(double rate, double torque, double load) const {
        const double friction = drag * rate + coulomb * std::tanh(rate * (1.0 / c::smoothing));
        return (gear * torque - friction + load) * inverse_inertia;
    }
    void step(double& angle, double& rate, double h, double torque, double load) const {
        const double k1 = acceleration(rate, torque, load);
        const double r2 = rate + 0.5 * h * k1, k2 = acceleration(r2, torque, load);
        const double r3 = rate + 0.5 * h * k2, k3 = acceleration(r3, torque, load);
        const double r4 = rate + h * k3, k4 = acceleration(r4, torque, load);
        angle += h / 6.0 * (rate + 2.0 * r2 + 2.0 * r3 + r4);
        rate += h / 6.0 * (k1 + 2.0 * k2 + 2.0 * k3 + k4);
    }
};

template <bool Noise> void simulate_trial(const drive& p, normal_numbers<Noise>& normal, const double* reference,
                                          long samples, double* measures) {
    constexpr double ts = c::sample_period;
    constexpr double k1 = c::controller_bandwidth * c::controller_bandwidth, k2 = 2.0 * c::controller_bandwidth;
    const long peak_from = long(c::peak_after / ts + 0.5);

    // The command changes `fraction` after the sample instant, from the one `whole` + 1 samples old to the next.
    long whole = long(std::floor(p.delay / ts + 1e-9));
    double fraction = p.delay - double(whole) * ts;
    if (fraction < 1e-9 * ts) fraction = 0.0;
    const double before = fraction > 0.0 ? fraction : 0.5 * ts, after = ts - before;
    const double keep = std::exp(-ts / c::correlation_time), load_gain = p.intensity * std::sqrt(1.0 - keep * keep);

    extended_observer observer(c::observer_bandwidth, ts);
    double angle = 0.0, rate = 0.0, load = 0.0, u[4] = {0.0, 0.0, 0.0, 0.0}; // this command and the three before
    double peak = 0.0, torque_square = 0.0, square_sum = 0.0, square_before = 0.0, variation = 0.0, saturated = 0.0;
    for (long k = 0; k < samples; ++k) {
        load = k == 0 ? p.intensity * normal() : keep * load + load_gain * normal();
        const double r = reference[k], error = r - angle;
        const double measured = quantise(angle + c::noise * normal(), c::resolution);
        observer.update(r - measured, -c::b0 * u[0]);
        const double wanted = (k1 * observer.x1 + k2 * observer.x2 + observer.x3) / c::b0;
        for (int i = 3; i > 0; --i) u[i] = u[i - 1];
        u[0] = std::clamp(wanted, -c::limit, c::limit);
        const double late = u[whole], early = fraction > 0.0 ? u[whole + 1] : late;

        if (k >= peak_from) peak = std::max(peak, std::abs(error));
        torque_square += early * early;
        const double square = error * error;
        if (k > 0) {
            square_sum += 0.5 * ts * (square_before + square);
            variation += std::abs(u[0] - u[1]);
        }
        square_before = square;
        if (k + 1 == samples) break;
        if (u[0] <= -c::limit || u[0] >= c::limit) saturated += ts;

        p.step(angle, rate, before, early, load);
        p.step(angle, rate, after, late, load);
    }
    const double m[5] = {peak, std::sqrt(torque_square / double(samples)), square_sum, variation, saturated};
    std::copy_n(m, 5, measures);
}

template <bool Noise> void simulate_all(const double* parameters, long trials, const double* reference, long samples,
                                        double* measures, int threads, std::uint64_t seed) {
    divide_trials(trials, threads, [=](long first, long last, int worker) {
        normal_numbers<Noise> normal(seed + std::uint64_t(worker));
        for (long t = first; t < last; ++t) {
            const auto p = [&](int i) { return parameters[i * trials + t]; };
            double m[5];
            simulate_trial({1.0 / p(0), p(1), p(2), p(3), p(4), p(5)}, normal, reference, samples, m);
            for (int i = 0; i < 5; ++i) measures[i * trials + t] = m[i];
        }
    });
}

} // namespace

extern "C" void simulate(const double* parameters, long trials, const double* reference, long samples, double* measures,
                         int threads, std::uint64_t seed, int with_noise) {
    with_noise ? simulate_all<true>(parameters, trials, reference, samples, measures, threads, seed)
               : simulate_all<false>(parameters, trials, reference, samples, measures, threads, seed);
}
