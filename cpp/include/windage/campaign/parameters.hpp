// Drawing the parameters of trials: every spread is the image of one uniform number, a pure function of
// (seed, trial, stream of the spread). Correlated spreads share a Gaussian copula.
#pragma once

#include <cstdint>
#include <vector>

#include <Eigen/Core>

#include <windage/campaign/description.hpp>

namespace windage {

/// The spread as `quantile` reads it: values that are listed stand in ascending order, so that a larger uniform number
/// never draws a smaller value, and probabilities are added up.
/// Throws std::invalid_argument naming the spread and what is wrong with its numbers.
spread_description prepared(spread_description s);

class parameter_source {
public:
    explicit parameter_source(const study_description& study);

    std::size_t count() const { return spreads_.size(); }
    /// Parameter p of trial trials[i] into values[p * size + i]; `size` fills whole packs.
    void draw(const std::uint64_t* trials, std::size_t size, double* values) const;
    /// Largest number of trials that the spreads can supply (tables of rows end).
    std::uint64_t trials_available() const { return available_; }

private:
    struct copula {
        std::vector<int> columns;
        Eigen::MatrixXd factor; // lower Cholesky factor
    };

    void correlate(const copula& c, std::size_t size, double* uniforms) const;

    std::uint64_t seed_;
    std::uint64_t available_;
    std::vector<spread_description> spreads_; // prepared
    std::vector<copula> copulas_;
};

/// The value of a prepared spread at probability p (for `rows`: of trial `trial`). Between its bounds and monotone in p
/// for every p in [2^-53, 1 - 2^-53].
double quantile(const spread_description& s, double p, std::uint64_t trial);

} // namespace windage
