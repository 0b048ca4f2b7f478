// What a loop is, in numbers: plant, controller, sensor, actuator, reference, disturbances and timing.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include <windage/control/description.hpp>
#include <windage/plant/description.hpp>

namespace windage {

/// Functions of time, used as references and disturbances. `numbers` by kind (times in s, angles in rad):
enum class time_function_kind {
    constant,     ///< value
    step,         ///< amplitude, at, initial
    ramp,         ///< slope, start, stop, initial      (held after stop)
    sine,         ///< amplitude, period, phase, offset, start   (offset before start)
    pulse,        ///< amplitude, start, width
    quintic,      ///< amplitude, start, duration, initial     (10 s^3 - 15 s^4 + 6 s^5)
    jerk_limited, ///< amplitude, start, speed limit, acceleration limit, jerk limit, initial
    table_linear, ///< times, then as many values; straight lines between, held outside
    table_hold,   ///< times, then as many values; each value held until the next time
    sum,          ///< none; the sum of its terms, from the first to the last
};

struct time_function_description {
    time_function_kind kind = time_function_kind::constant;
    std::vector<number> numbers{0.0};
    std::vector<time_function_description> terms; ///< of a sum; none of them a sum
};

enum class noise_kind {
    gauss_markov, ///< standard deviation, correlation time: first-order, exactly sampled, held between samples
    white,        ///< two-sided spectral density (unit^2/Hz): variance density / Ts, held between samples
};

struct noise_description {
    noise_kind kind = noise_kind::gauss_markov;
    std::vector<number> numbers;
    std::uint32_t stream = 0; ///< random stream
};

/// A function of time plus noises.
struct disturbance_description {
    std::string name;
    time_function_description function; ///< zero by default
    std::vector<noise_description> noises;
};

/// y_m = clip(quantise(filter(gain * y(t - delay) + bias + noise))).
struct sensor_description {
    number delay = 0.0; ///< s, any real number >= 0
    number gain = 1.0;
    number bias = 0.0;
    number noise = 0.0;            ///< standard deviation of white noise, a sample
    number filter_frequency = 0.0; ///< Hz, first-order low pass by backward Euler; 0: none
    number resolution = 0.0;       ///< 0: none
    number low, high;              ///< range; used where has_range
    bool has_range = false;
    std::uint32_t stream = 1; ///< random stream of the noise
};

/// Command limits, rate limit, resolution; then transport delay; then first-order lag.
struct actuator_description {
    number low, high; ///< used where has_limits
    bool has_limits = false;
    number rate_limit = 0.0;     ///< unit/s; 0: none
    number resolution = 0.0;     ///< 0: none
    number delay = 0.0;          ///< s, any real number >= 0
    number time_constant = 0.0;  ///< s, of the lag; 0: none
    number initial = 0.0;        ///< command before the first sample
    bool delay_is_whole = false; ///< the drawn delay is a multiple of the sample period in every trial
};

/// A signal computed from others at each sample.
struct expression_description {
    std::string name;
    program formula; ///< one output; inputs of kind `signal`, `value` or `time`
};

struct loop_description {
    plant_description plant;
    controller_description controller;
    number sample_period = 1e-3; ///< s
    number duration = 1.0;       ///< s
    time_function_description reference;
    std::vector<disturbance_description> disturbances;
    sensor_description sensor;
    actuator_description actuator;
    integrator_kind integrator = integrator_kind::rk4;
    int steps_per_sample = 1;
    double reference_tolerance = 1e-10; ///< of integrator_kind::reference, relative and (times 1e-3) absolute
    std::vector<expression_description> expressions;
    std::string input_name, output_name; ///< the plant's own words for "input" and "output"
};

} // namespace windage
