// What is measured on a trial.
#pragma once

#include <limits>
#include <string>
#include <vector>

#include <windage/lanes/number.hpp>

namespace windage {

enum class measure_kind {
    peak, ///< largest magnitude
    minimum,
    maximum,
    mean,
    rms,
    standard_deviation,     ///< root mean square about the mean
    final_value,            ///< last value in the window
    integral_absolute,      ///< integral of the magnitude (of "error": IAE)
    integral_square,        ///< integral of the square (of "error": ISE)
    integral_time_absolute, ///< integral of time since the window's start times the magnitude (of "error": ITAE)
    total_variation,        ///< sum of the magnitudes of the changes from sample to sample
    rms_change,             ///< root mean square of the change from sample to sample
    time_outside,           ///< time outside [a, b]
    time_at_limits,         ///< time at or beyond the limits [a, b] (time in saturation)
    overshoot,              ///< IEC 60050-351, 351-45-38: excess over the final value, as a fraction of the change
    undershoot,             ///< excess below the initial value, as a fraction of the change
    rise_time,              ///< from fraction a to fraction b of the change
    settling_time, ///< IEC 60050-351, 351-45-37: until the deviation stays within the band a (fraction of the change)
    settling_time_absolute, ///< the same with the band a in the unit of the signal, about zero
    peak_to_peak,           ///< largest value less smallest value
    reversals,              ///< changes of direction by more than the dead band a
    time_of_peak,           ///< time since the window's start of the first sample with the largest magnitude
    difference,             ///< of two measures: operands[0] - operands[1]
    ratio,                  ///< of two measures: operands[0] / operands[1]
};

struct measure_description {
    measure_kind kind = measure_kind::peak;
    std::string signal = "error";
    number after = 0.0;                                      ///< window start, s
    number before = std::numeric_limits<double>::infinity(); ///< window end, s
    number a, b;                                             ///< by kind
    std::vector<measure_description> operands;               ///< of a difference or ratio, which reads no signal itself
};

} // namespace windage
