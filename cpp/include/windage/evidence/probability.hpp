// Probabilities and counts as arguments: checks, the complement, and the two binomial tails on which every claim rests.
//
// Guarantee: a probability that was written as a decimal (0.95, 0.99999999) means that decimal: its complement is the
// double nearest to 1 - 0.99999999, not the rounding error that the subtraction of doubles leaves. A wrong argument
// is a std::invalid_argument that names the field, the value and what was expected.
// Not in the trial path: these functions use libm and are not promised to the last bit across machines.
#pragma once

#include <cstdint>

namespace windage::evidence {

/// Counts above this are not whole numbers in double precision any more.
inline constexpr std::int64_t largest_count = std::int64_t{1} << 53;

/// Smallest probability, and smallest distance from certainty, that a claim may state.
inline constexpr double smallest_probability = 1e-15;

/// A tail probability within this relative distance of the risk counts as equal to it, so that a claim that holds with
/// equality in decimals (0.9^3 = 1 - 0.271) is not lost to rounding. The guarantee loses this fraction of the risk.
inline constexpr double tie_tolerance = 1e-12;

/// 1 - probability, where a probability of at most 15 decimals means exactly these decimals.
double complement(double probability);

/// Throws unless the value lies in [smallest_probability, 1 - smallest_probability].
void check_probability(const char* field, double value);

/// Throws unless least <= value <= most.
void check_count(const char* field, std::int64_t value, std::int64_t least, std::int64_t most);

/// Throws unless 0 <= failures <= trials <= largest_count.
void check_counts(std::int64_t failures, std::int64_t trials);

/// P[X <= events] for X binomial with the given trials and probability.
double binomial_at_most(std::int64_t events, std::int64_t trials, double probability);

/// P[X >= events] for X binomial with the given trials and probability.
double binomial_at_least(std::int64_t events, std::int64_t trials, double probability);

/// True if a tail probability is at most the risk, ties included.
inline bool within_risk(double tail, double risk) { return tail <= risk * (1.0 + tie_tolerance); }

} // namespace windage::evidence
