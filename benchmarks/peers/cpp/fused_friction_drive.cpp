// Loop (b) as a kernel written by hand for this one loop: the practical limit that windage is compared with.
// It uses windage's packs, elementary functions and random streams, hence the same noise as windage's trials.
//
// A sample is six passes over a small block of trials that stays in the first-level cache: noise, then sensor,
// controller, delay and measures together, then the four stages of the two integration steps. Within a pass everything
// is in registers and nothing is computed twice; numbers that do not change are folded into each other before the first
// sample. Doing the whole sample for one pack of trials at a time was measured first and is half as fast: its eight
// hyperbolic tangents wait for each other, while those of neighbouring packs overlap.
#include <algorithm>
#include <atomic>
#include <cstdint>
#include <thread>
#include <vector>

#include <windage/lanes/elementary.hpp>
#include <windage/lanes/philox.hpp>

#include "constants.hpp"

#ifndef FUSED_LANES
#define FUSED_LANES (2 * windage::register_lanes)
#endif
#ifndef FUSED_BLOCK
#define FUSED_BLOCK 64
#endif

namespace {

using namespace windage;
namespace c = constants;
constexpr int width = FUSED_LANES, block = FUSED_BLOCK, n_parameters = 6, n_measures = 5;
using pack_t = pack<width>;

struct alignas(128) quantity {
    double values[block];
    WINDAGE_INLINE pack_t operator[](int i) const { return pack_t::load(values + i); }
    WINDAGE_INLINE void set(int i, pack_t x) { x.store(values + i); }
};

template <class F> WINDAGE_INLINE void for_each_pack_of_block(F&& f) {
    for (int i = 0; i < block; i += width) f(i);
}

struct noise_source {
    std::uint64_t seed;
    std::uint32_t load_stream, sensor_stream;
};

// Correction gains of the current observer, all poles at exp(-omega_o Ts).
struct observer_gains {
    double l1, l2, l3;
    observer_gains() {
        const double z = exponential(-c::observer_bandwidth * c::sample_period), d = 1.0 - z;
        l1 = 1.0 - z * z * z;
        l2 = 1.5 * d * d * (1.0 + z) / c::sample_period;
        l3 = d * d * d / (c::sample_period * c::sample_period);
    }
};

class fused_block {
public:
    fused_block(const noise_source& noise, bool with_noise) : noise_(noise), with_noise_(with_noise) {}

    void run(const double* parameters, long trials, long first, const double* reference, long samples) {
        fold(parameters, trials, first);
        const long peak_from = long(c::peak_after / c::sample_period + 0.5), last = samples - 1;
        for (long k = 0; k <= last; ++k) {
            if (k % 2 == 0 && with_noise_) draw(std::uint64_t(first), std::uint32_t(k / 2));
            const quantity &load_noise = k % 2 == 0 ? load_even_ : load_odd_,
                           &sensor_noise = k % 2 == 0 ? sensor_even_ : sensor_odd_;
            const double r = reference[k];
            if (k == 0)
                sample<true, false, true>(r, load_noise, sensor_noise);
            else if (k == last)
                sample<false, true, false>(r, load_noise, sensor_noise);
            else if (k < peak_from)
                sample<false, false, true>(r, load_noise, sensor_noise);
            else
                sample<false, true, true>(r, load_noise, sensor_noise);
            if (k == last) break;
            step(before_, drive_before_);
            step(after_, drive_after_);
        }
        for_each_pack_of_block([&](int i) WINDAGE_LANE_LOOP {
            square_root(torque_square_[i] / double(samples)).store(torque_square_.values + i);
            error_square_.set(i, (0.5 * c::sample_period) * error_square_[i]);
            saturated_.set(i, c::sample_period * saturated_[i]);
        });
    }

    void write(double* measures, long trials, long first) const {
        const quantity* m[n_measures] = {&peak_, &torque_square_, &error_square_, &variation_, &saturated_};
        for (int i = 0; i < n_measures; ++i)
            std::copy_n(m[i]->values, std::min<long>(block, trials - first), measures + i * trials + first);
    }

private:
    void fold(const double* parameters, long trials, long first) {
        quantity p[n_parameters];
        for (int n = 0; n < n_parameters; ++n)
            for (int lane = 0; lane < block; ++lane)
                p[n].values[lane] = parameters[n * trials + std::min(first + lane, trials - 1)];
        for (quantity* q :
             {&angle_, &rate_, &load_, &x1_, &x2_, &x3_, &u0_, &u1_, &u2_, &peak_, &torque_square_, &error_square_,
              &error_before_, &variation_, &saturated_, &load_even_, &load_odd_, &sensor_even_, &sensor_odd_})
            std::fill_n(q->values, block, 0.0);
        const double ratio = c::sample_period / c::correlation_time;
        const double gain = square_root(pack<1>(-exponential_minus_one(-2.0 * ratio)))[0];
        load_keep_ = exponential(-ratio);
        for_each_pack_of_block([&](int i) WINDAGE_LANE_LOOP {
            const pack_t inverse = 1.0 / p[0][i];
            gear_.set(i, p[1][i] * inverse);
            drag_.set(i, p[2][i] * inverse);
            coulomb_.set(i, p[3][i] * inverse);
            const pack_t delay = p[4][i], total = delay / c::sample_period, nearest = floor(total + 0.5);
            const auto is_whole = absolute(total - nearest) <= 1e-9;
            const pack_t whole = select(is_whole, nearest, floor(total));
            const pack_t fraction = select(is_whole, pack_t(0.0), delay - whole * c::sample_period);
            const pack_t before = select(fraction > 0.0, fraction, pack_t(0.5 * c::sample_period));
            whole_.set(i, whole);
            // Oldest command that acts: of `whole` + 1 samples ago where the command changes inside the interval.
            early_.set(i, whole + as_number(fraction > 0.0));
            before_.set(i, before);
            after_.set(i, c::sample_period - before);
            load_start_.set(i, p[5][i] * inverse);
            load_gain_.set(i, p[5][i] * inverse * gain);
        });
    }

    void draw(std::uint64_t first_trial, std::uint32_t pair) {
        const auto draw_one = [&](std::uint32_t stream, quantity& even, quantity& odd) {
            for_each_pack_of_block([&](int i) WINDAGE_LANE_LOOP {
                pack_t a, b;
                normal_pair(first_trial + std::uint64_t(i), stream_key{noise_.seed, stream}, pair, a, b);
                even.set(i, a);
                odd.set(i, b);
            });
        };
        draw_one(noise_.load_stream, load_even_, load_odd_);
        draw_one(noise_.sensor_stream, sensor_even_, sensor_odd_);
    }

    // Sensor, observer, controller, limits, delay and measures. The load is kept as an acceleration.
    template <bool First, bool Peak, bool Advances>
    void sample(double reference, const quantity& load_noise, const quantity& sensor_noise) {
        constexpr double ts = c::sample_period, inverse_resolution = 1.0 / c::resolution;
        constexpr double k1 = c::controller_bandwidth * c::controller_bandwidth / c::b0,
                         k2 = 2.0 * c::controller_bandwidth / c::b0, k3 = 1.0 / c::b0;
        const observer_gains o = gains_;
        for_each_pack_of_block([&](int i) WINDAGE_LANE_LOOP {
            const pack_t load =
                First ? load_start_[i] * load_noise[i] : load_keep_ * load_[i] + load_gain_[i] * load_noise[i];
            load_.set(i, load);
            const pack_t angle = angle_[i], error = reference - angle;
            const pack_t noisy = angle + c::noise * sensor_noise[i];
            const pack_t measured = floor(noisy * inverse_resolution + 0.5) * c::resolution;
            const pack_t u1 = u0_[i], u2 = u1_[i], u3 = u2_[i];
            pack_t x1 = x1_[i], x2 = x2_[i], x3 = x3_[i];
            const pack_t top = x3 - c::b0 * u1;
            x1 = x1 + ts * (x2 + (0.5 * ts) * top);
            x2 = x2 + ts * top;
            const pack_t innovation = (reference - measured) - x1;
            x1 = x1 + o.l1 * innovation;
            x2 = x2 + o.l2 * innovation;
            x3 = x3 + o.l3 * innovation;
            x1_.set(i, x1);
            x2_.set(i, x2);
            x3_.set(i, x3);
            const pack_t wanted = (k1 * x1 + k2 * x2) + k3 * x3;
            const pack_t u0 = clip(wanted, pack_t(-c::limit), pack_t(c::limit));
            u0_.set(i, u0);
            u1_.set(i, u1);
            u2_.set(i, u2);
            const pack_t whole = whole_[i], oldest = early_[i];
            const pack_t late = select(whole >= 2.0, u2, select(whole >= 1.0, u1, u0));
            const pack_t early = select(oldest >= 3.0, u3, select(oldest >= 2.0, u2, select(oldest >= 1.0, u1, u0)));
            drive_before_.set(i, gear_[i] * early + load);
            drive_after_.set(i, gear_[i] * late + load);

            if constexpr (Peak) peak_.set(i, maximum(peak_[i], absolute(error)));
            torque_square_.set(i, torque_square_[i] + early * early);
            const pack_t square = error * error;
            if constexpr (!First) {
                error_square_.set(i, error_square_[i] + (error_before_[i] + square));
                variation_.set(i, variation_[i] + absolute(u0 - u1));
            }
            error_before_.set(i, square);
            if constexpr (Advances) saturated_.set(i, saturated_[i] + as_number((u0 <= -c::limit) | (u0 >= c::limit)));
        });
    }

    WINDAGE_INLINE pack_t acceleration(int i, pack_t drive, pack_t rate) const {
        return (drive - drag_[i] * rate) - coulomb_[i] * hyperbolic_tangent(rate * (1.0 / c::smoothing));
    }

    // Classical Runge-Kutta; the rates at the stages are also what the angle needs.
    void step(const quantity& length, const quantity& drive) {
        for_each_pack_of_block([&](int i) WINDAGE_LANE_LOOP {
            const pack_t rate = rate_[i], k1 = acceleration(i, drive[i], rate);
            stage_rate_.set(i, rate + (0.5 * length[i]) * k1);
            k_sum_.set(i, k1);
        });
        for_each_pack_of_block([&](int i) WINDAGE_LANE_LOOP {
            const pack_t rate = rate_[i], r2 = stage_rate_[i], k2 = acceleration(i, drive[i], r2);
            stage_rate_.set(i, rate + (0.5 * length[i]) * k2);
            k_sum_.set(i, k_sum_[i] + 2.0 * k2);
            r_sum_.set(i, rate + 2.0 * r2);
        });
        for_each_pack_of_block([&](int i) WINDAGE_LANE_LOOP {
            const pack_t r3 = stage_rate_[i], k3 = acceleration(i, drive[i], r3);
            stage_rate_.set(i, rate_[i] + length[i] * k3);
            k_sum_.set(i, k_sum_[i] + 2.0 * k3);
            r_sum_.set(i, r_sum_[i] + 2.0 * r3);
        });
        for_each_pack_of_block([&](int i) WINDAGE_LANE_LOOP {
            const pack_t r4 = stage_rate_[i], k4 = acceleration(i, drive[i], r4), sixth = (1.0 / 6.0) * length[i];
            angle_.set(i, angle_[i] + sixth * (r_sum_[i] + r4));
            rate_.set(i, rate_[i] + sixth * (k_sum_[i] + k4));
        });
    }

    noise_source noise_;
    bool with_noise_;
    observer_gains gains_;
    double load_keep_ = 0.0;
    quantity gear_, drag_, coulomb_, whole_, early_, before_, after_, load_start_, load_gain_; // folded numbers
    quantity angle_, rate_, load_, x1_, x2_, x3_, u0_, u1_, u2_;
    quantity load_even_, load_odd_, sensor_even_, sensor_odd_, drive_before_, drive_after_, stage_rate_, k_sum_, r_sum_;
    quantity peak_, torque_square_, error_square_, error_before_, variation_, saturated_;
};

} // namespace

/// Parameter p of trial t at parameters[p * trials + t], measure m of it at measures[m * trials + t].
extern "C" void simulate(const double* parameters, long trials, const double* reference, long samples, double* measures,
                         int threads, std::uint64_t seed, std::uint32_t load_stream, std::uint32_t sensor_stream,
                         int with_noise) {
    std::atomic<long> next{0};
    const auto work = [&] {
        fused_block b({seed, load_stream, sensor_stream}, with_noise != 0);
        for (long first; (first = next.fetch_add(block)) < trials;) {
            b.run(parameters, trials, first, reference, samples);
            b.write(measures, trials, first);
        }
    };
    std::vector<std::thread> others;
    for (int i = 1; i < threads; ++i) others.emplace_back(work);
    work();
    for (std::thread& t : others) t.join();
}
