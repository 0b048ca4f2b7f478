// The standard normal distribution: normal_cdf and normal_quantile on packs.
//
// Guarantee: the same bits for every W and instruction set; NaN in gives NaN out; relative accuracy as stated at each
// function, tails included, measured against multiple precision.
#pragma once

#include <windage/lanes/exponential.hpp>
#include <windage/lanes/pack.hpp>
#include <windage/lanes/polynomial.hpp>

namespace windage {

namespace detail {
/// (x + 5) e^(x^2/2) Q(x) in powers of t = (x - 5) / (x + 5), 0 <= x <= 38, Q the upper tail of the normal law. The
/// variable and the smoothing factor follow M. M. Shepherd, J. G. Laframboise, Chebyshev approximation of
/// (1 + 2x) exp(x^2) erfc x in 0 <= x < infinity, Math. Comp. 36 (1981) 249-253; own coefficients.
inline constexpr double normal_tail[] = {
    0x1.89d3abe1f95aep-1,   -0x1.54ad03f27ca16p-1, 0x1.fb31653876f96p-2,   -0x1.410ed5f875b16p-2,
    0x1.51f6329f016c2p-3,   -0x1.1b1c254c95362p-4, 0x1.54b4d4f4c00a1p-6,   -0x1.88590eb42c847p-9,
    -0x1.a25037cdfc746p-11, 0x1.1daf1e78c73e1p-11, -0x1.f21466d35705cp-15, -0x1.a17130a828216p-15,
    0x1.17dd3ab9c1dc1p-16,  0x1.0b3064316fb91p-18, -0x1.73ad22a9ed067p-19, -0x1.6a9172e84745bp-22,
    0x1.d0d5f33a2115fp-22,  0x1.767258419db0cp-25, -0x1.195c7ece622f8p-24, -0x1.602f75b46d6a7p-27,
    0x1.f234906b8f724p-28,  0x1.18c1d8dc96fc4p-29,
};

/// M. J. Wichura, Algorithm AS 241, J. R. Stat. Soc. C 37 (1988) 477-484, PPND16: numerators and denominators for
/// |p - 1/2| <= 0.425 (variable 0.180625 - (p - 1/2)^2), and with r = sqrt(-ln min(p, 1 - p)) for r <= 5 (variable
/// r - 1.6) and beyond (variable r - 5).
inline constexpr double central_numerator[] = {
    3.3871328727963666080e0, 1.3314166789178437745e2, 1.9715909503065514427e3, 1.3731693765509461125e4,
    4.5921953931549871457e4, 6.7265770927008700853e4, 3.3430575583588128105e4, 2.5090809287301226727e3,
};
inline constexpr double central_denominator[] = {
    1.0,
    4.2313330701600911252e1,
    6.8718700749205790830e2,
    5.3941960214247511077e3,
    2.1213794301586595867e4,
    3.9307895800092710610e4,
    2.8729085735721942674e4,
    5.2264952788528545610e3,
};
inline constexpr double tail_numerator[] = {
    1.42343711074968357734e0, 4.63033784615654529590e0,  5.76949722146069140550e0,  3.64784832476320460504e0,
    1.27045825245236838258e0, 2.41780725177450611770e-1, 2.27238449892691845833e-2, 7.74545014278341407640e-4,
};
inline constexpr double tail_denominator[] = {
    1.0,
    2.05319162663775882187e0,
    1.67638483018380384940e0,
    6.89767334985100004550e-1,
    1.48103976427480074590e-1,
    1.51986665636164571966e-2,
    5.47593808499534494600e-4,
    1.05075007164441684324e-9,
};
inline constexpr double far_numerator[] = {
    6.65790464350110377720e0,  5.46378491116411436990e0,  1.78482653991729133580e0,  2.96560571828504891230e-1,
    2.65321895265761230930e-2, 1.24266094738807843860e-3, 2.71155556874348757815e-5, 2.01033439929228813265e-7,
};
inline constexpr double far_denominator[] = {
    1.0,
    5.99832206555887937690e-1,
    1.36929880922735805310e-1,
    1.48753612908506148525e-2,
    7.86869131145613259100e-4,
    1.84631831751005468180e-5,
    1.42151175831644588870e-7,
    2.04426310338993978564e-15,
};

/// e^(-x^2/2) for x >= 0: x^2 is taken apart exactly, else its rounding would cost |x^2/2| ULP in the tail.
template <int W> WINDAGE_INLINE pack<W> normal_bell(pack<W> x) {
    const pack<W> high = upper_half(x);
    const pack<W> rest = 0.5 * ((x - high) * (x + high)); // at most 4e-5
    const pack<W> correction = rest - 0.5 * (rest * rest) * (1.0 - rest * (1.0 / 3.0));
    const pack<W> bell = exponential(-0.5 * (high * high));
    return bell - bell * correction;
}
} // namespace detail

/// Probability that a standard normal number exceeds x >= 0. Error at most 9 ULP (measured: 6.8,
/// 1e-15 of the value) up to 37.5; 0 from 37.7 on.
template <int W> WINDAGE_INLINE pack<W> normal_upper_tail(pack<W> x) {
    const pack<W> limited = minimum(x, pack<W>(38.0));
    const pack<W> inverse = 1.0 / (limited + 5.0);
    const pack<W> ratio = detail::polynomial((limited - 5.0) * inverse, detail::normal_tail) * inverse;
    return detail::normal_bell(limited) * ratio;
}

/// Probability that a standard normal number is at most x. Domain: all x; 0 below -37.6.
/// Error at most 9 ULP (measured: 6.8, 1e-15 of the value) in both tails.
template <int W> WINDAGE_INLINE pack<W> normal_cdf(pack<W> x) {
    const pack<W> tail = normal_upper_tail(absolute(x));
    return select(x > 0.0, 1.0 - tail, tail);
}

/// The x with normal_cdf(x) = p. Domain: 0 <= p <= 1, infinite at the ends, NaN beyond.
/// Error at most 8 ULP (measured: 5.1, 7e-16 of the value).
template <int W> WINDAGE_INLINE pack<W> normal_quantile(pack<W> p) {
    const pack<W> q = p - 0.5;
    const mask<W> central = absolute(q) <= 0.425;
    const pack<W> r = square_root(-logarithm(select(q < 0.0, p, 1.0 - p)));
    const mask<W> far = r > 5.0;
    const pack<W> u = 0.180625 - q * q, v = r - 1.6, w = r - 5.0;
    const pack<W> tail_top =
        select(far, detail::polynomial(w, detail::far_numerator), detail::polynomial(v, detail::tail_numerator));
    const pack<W> tail_bottom =
        select(far, detail::polynomial(w, detail::far_denominator), detail::polynomial(v, detail::tail_denominator));
    const pack<W> top = select(central, q * detail::polynomial(u, detail::central_numerator), tail_top);
    const pack<W> bottom = select(central, detail::polynomial(u, detail::central_denominator), tail_bottom);
    const pack<W> size = top / bottom;
    const pack<W> inside = select(central, size, copy_sign(size, q));
    return select(r == detail::infinity, copy_sign(pack<W>(detail::infinity), q), inside);
}

/// Scalars: one lane of the pack, hence the same bits.
WINDAGE_INLINE double normal_upper_tail(double x) { return normal_upper_tail(pack<1>(x))[0]; }
WINDAGE_INLINE double normal_cdf(double x) { return normal_cdf(pack<1>(x))[0]; }
WINDAGE_INLINE double normal_quantile(double p) { return normal_quantile(pack<1>(p))[0]; }

} // namespace windage
