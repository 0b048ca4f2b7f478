// Reducers: how a signal in a window becomes one number. Each is a handful of running values, a way to add a sample
// and a way to finish.
//
// A sample comes as `at`: value x, time since the window's start t, sample period dt, whether it is the first one in
// the window and whether it is the last one, and whether its sample interval lies outside the window for the most part.
#pragma once

#include <limits>

#include <windage/lanes/pack.hpp>

namespace windage {

struct sample_point {
    wide x, t, dt;
    mask<lanes> is_first, is_last, is_outside_after;
};

namespace reducers {

inline constexpr double infinite = std::numeric_limits<double>::infinity();

struct peak {
    static constexpr int values = 1;
    static constexpr bool stays_undefined = true;
    static void begin(wide* v) { v[0] = 0.0; }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) { v[0] = maximum(v[0], absolute(at.x)); }
    static wide finish(const wide* v) { return v[0]; }
};

struct lowest {
    static constexpr int values = 1;
    static constexpr bool stays_undefined = true;
    static void begin(wide* v) { v[0] = infinite; }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) { v[0] = minimum(v[0], at.x); }
    static wide finish(const wide* v) { return v[0]; }
};

struct highest {
    static constexpr int values = 1;
    static constexpr bool stays_undefined = true;
    static void begin(wide* v) { v[0] = -infinite; }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) { v[0] = maximum(v[0], at.x); }
    static wide finish(const wide* v) { return v[0]; }
};

struct final_value {
    static constexpr int values = 1;
    static constexpr bool stays_undefined = false;
    static void begin(wide* v) { v[0] = std::numeric_limits<double>::quiet_NaN(); }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) { v[0] = at.x; }
    static wide finish(const wide* v) { return v[0]; }
};

struct mean {
    static constexpr int values = 2;
    static constexpr bool stays_undefined = true;
    static void begin(wide* v) { v[0] = v[1] = 0.0; }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) {
        v[0] += at.x;
        v[1] += wide(1.0);
    }
    static wide finish(const wide* v) { return v[0] / v[1]; }
};

struct root_mean_square {
    static constexpr int values = 2;
    static constexpr bool stays_undefined = true;
    static void begin(wide* v) { v[0] = v[1] = 0.0; }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) {
        v[0] += at.x * at.x;
        v[1] += wide(1.0);
    }
    static wide finish(const wide* v) { return square_root(v[0] / v[1]); }
};

/// About the mean; deviations are taken from the first sample, so that a large mean does not cancel.
struct standard_deviation {
    static constexpr int values = 4;
    static constexpr bool stays_undefined = true;
    static void begin(wide* v) { v[0] = v[1] = v[2] = v[3] = 0.0; }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) {
        v[3] = select(at.is_first, at.x, v[3]);
        const wide d = at.x - v[3];
        v[0] += d;
        v[1] += d * d;
        v[2] += wide(1.0);
    }
    static wide finish(const wide* v) {
        const wide m = v[0] / v[2];
        return square_root(maximum(v[1] / v[2] - m * m, wide(0.0)));
    }
};

/// Integrals by the trapezium rule over the samples in the window.
template <class Integrand> struct integral {
    static constexpr int values = 1;
    static constexpr bool stays_undefined = true;
    static void begin(wide* v) { v[0] = 0.0; }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) {
        const auto is_end = at.is_first | at.is_last;
        const wide weight = select(at.is_first & at.is_last, 0.0, select(is_end, 0.5 * at.dt, at.dt));
        v[0] += weight * Integrand::of(at);
    }
    static wide finish(const wide* v) { return v[0]; }
};
struct magnitude {
    static WINDAGE_INLINE wide of(const sample_point& at) { return absolute(at.x); }
};
struct square {
    static WINDAGE_INLINE wide of(const sample_point& at) { return at.x * at.x; }
};
struct time_weighted_magnitude {
    static WINDAGE_INLINE wide of(const sample_point& at) { return at.t * absolute(at.x); }
};

struct total_variation {
    static constexpr int values = 2;
    static constexpr bool stays_undefined = true;
    static void begin(wide* v) { v[0] = v[1] = 0.0; }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) {
        v[0] += select(at.is_first, 0.0, absolute(at.x - v[1]));
        v[1] = at.x;
    }
    static wide finish(const wide* v) { return v[0]; }
};

struct rms_change {
    static constexpr int values = 3;
    static constexpr bool stays_undefined = true;
    static void begin(wide* v) { v[0] = v[1] = v[2] = 0.0; }
    static WINDAGE_INLINE void add(wide* v, const sample_point& at) {
        const wide change = at.x - v[1];
        v[0] += select(at.is_first, 0.0, change * change);
        v[2] += select(at.is_first, wide(0.0), wide(1.0));
        v[1] = at.x;
    }
    static wide finish(const wide* v) { return square_root(v[0] / v[2]); }
};

} // namespace reducers
} // namespace windage
