// Loop (a), one trial at a time in plain C++.
#include "constants.hpp"
#include "scalar.hpp"

namespace {

namespace c = constants;

// exp(A Ts) and the held input's column for K / (T^2 s^2 + 2 D T s + 1) with D < 1.
struct sampled_plant {
    double a11, a12, a21, a22, b1, b2;

    sampled_plant(double gain, double time_constant, double damping) {
        const double ts = c::sample_period, natural = 1.0 / time_constant, decay = damping * natural;
        const double omega = natural * std::sqrt(1.0 - damping * damping);
        const double e = std::exp(-decay * ts), s = std::sin(omega * ts) / omega, co = std::cos(omega * ts);
        a11 = e * (co + decay * s);
        a12 = e * s;
        a21 = -natural * natural * a12;
        a22 = e * (co - decay * s);
        b1 = gain * (1.0 - a11);
        b2 = gain * natural * natural * a12;
    }
};

void simulate_trial(const sampled_plant& plant, const double* reference, long samples, double* measures) {
    constexpr double k1 = c::controller_bandwidth * c::controller_bandwidth, k2 = 2.0 * c::controller_bandwidth;
    const long peak_from = long(c::peak_after / c::sample_period + 0.5);
    extended_observer observer(c::observer_bandwidth, c::sample_period);
    double y = 0.0, speed = 0.0, u = 0.0;
    double peak = 0.0, square_sum = 0.0, square_before = 0.0, largest = -INFINITY;
    for (long k = 0; k < samples; ++k) {
        const double r = reference[k], error = r - y;
        observer.update(y, c::b0 * u);
        u = (k1 * (r - observer.x1) - k2 * observer.x2 - observer.x3) / c::b0;

        if (k >= peak_from) peak = std::max(peak, std::abs(error));
        const double square = error * error;
        if (k > 0) square_sum += 0.5 * c::sample_period * (square_before + square);
        square_before = square;
        largest = std::max(largest, y);

        const double next = plant.a11 * y + plant.a12 * speed + plant.b1 * u;
        speed = plant.a21 * y + plant.a22 * speed + plant.b2 * u;
        y = next;
    }
    measures[0] = peak;
    measures[1] = square_sum;
    measures[2] = largest;
}

} // namespace

extern "C" void simulate(const double* parameters, long trials, const double* reference, long samples, double* measures,
                         int threads, std::uint64_t, int) {
    divide_trials(trials, threads, [=](long first, long last, int) {
        for (long t = first; t < last; ++t) {
            double m[3];
            simulate_trial({parameters[t], parameters[trials + t], parameters[2 * trials + t]}, reference, samples, m);
            for (int i = 0; i < 3; ++i) measures[i * trials + t] = m[i];
        }
    });
}
