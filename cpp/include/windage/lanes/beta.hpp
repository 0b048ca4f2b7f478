// The regularised incomplete beta function and its inverse, for beta-distributed spreads; scalar.
//
// Guarantee: only + - * / sqrt and the elementary functions of this library, in a fixed order, hence the same bits
// on every machine; every loop has a fixed largest number of steps. Invalid arguments give NaN, never a hang.
// Relative accuracy 1e-10 for parameters from 0.3 to 300 (tested); not meant for exact binomial bounds, which belong
// to the evidence floor.
#pragma once

namespace windage {

/// ln Gamma(z) for z > 0; NaN otherwise. Stirling's series after shifting z above 12
/// (M. Abramowitz, I. A. Stegun, Handbook of Mathematical Functions, 1964, 6.1.15 and 6.1.41).
double log_gamma(double z);

/// I_x(a, b) for a, b > 0 and 0 <= x <= 1; NaN otherwise. Continued fraction (NIST Digital Library of Mathematical
/// Functions, 8.17.22) by the modified method of Lentz (I. J. Thompson, A. R. Barnett, J. Comput. Phys. 64 (1986) 490).
double incomplete_beta(double a, double b, double x);

/// The x with I_x(a, b) = p for 0 <= p <= 1, by Newton steps in ln x or ln(1 - x) inside a shrinking bracket.
/// Solutions below 1e-300 come out as 0.
double incomplete_beta_inverse(double a, double b, double p);

} // namespace windage
