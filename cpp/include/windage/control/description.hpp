// What a controller is, in numbers.
#pragma once

#include <vector>

#include <windage/lanes/number.hpp>

namespace windage {

enum class adrc_form {
    output, ///< the observer follows the measured output (Herbst 2013, doi 10.3390/electronics2030246)
    error,  ///< the observer follows the control error (Madonski, Herbst, Stankovic 2023,
            ///< doi 10.1007/s11768-023-00129-y)
};
enum class discretisation_kind {
    zero_order_hold, ///< exact for a held input, poles at exp(-omega_o Ts)
    euler,           ///< forward Euler, poles at exp(-omega_o Ts)
};
enum class observer_input_kind {
    limited,   ///< the command after limits, rate limit and resolution: the observer knows the saturation
    commanded, ///< the controller's own output
};
enum class observer_start_kind {
    zero,     ///< all estimates zero
    measured, ///< the first estimate starts at the first measurement (error form: first error)
};

/// Linear active disturbance rejection control of order n with a current observer.
struct controller_description {
    adrc_form form = adrc_form::output;
    int order = 1;
    number controller_bandwidth = 1.0;    ///< rad/s; not used where controller_gains are given
    number observer_bandwidth = 10.0;     ///< rad/s; not used where observer_gains are given
    number b0 = 1.0;                      ///< critical gain
    std::vector<number> controller_gains; ///< k_1 .. k_n, or empty
    std::vector<number> observer_gains;   ///< correction gains l_1 .. l_{n+1} of the current observer, or empty
    number controller_gain_factor = 1.0;  ///< 0.5: half-gain tuning (Herbst, Hempel, Goehrt, Streif 2020)
    number observer_gain_factor = 1.0;
    discretisation_kind discretisation = discretisation_kind::zero_order_hold;
    observer_input_kind observer_input = observer_input_kind::limited;
    observer_start_kind observer_start = observer_start_kind::zero;
    int reference_derivatives = -1; ///< output form: how many are fed, the others taken as zero; -1: all n
    bool cancel_disturbance = true; ///< false: leave the estimated total disturbance uncancelled
};

} // namespace windage
