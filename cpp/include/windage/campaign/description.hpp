// What a campaign runs: a loop, what is measured on it, how its numbers are spread, and the seed.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include <windage/loop/description.hpp>
#include <windage/measure/description.hpp>

namespace windage {

/// Distributions; `numbers` by kind.
enum class spread_kind {
    normal,     ///< mean, standard deviation, low, high (truncation; infinite: none)
    uniform,    ///< low, high
    triangular, ///< low, mode, high
    lognormal,  ///< median, standard deviation of the logarithm
    beta,       ///< a, b, low, high
    choice,     ///< values, then as many probabilities
    samples,    ///< values, each as likely as any other
    rows,       ///< values; trial i takes value i (the user's own table, row after row)
    drawn_rows, ///< values, each as likely as any other, in the order of the table: one stream keeps its rows together
};

struct spread_description {
    std::string name;
    spread_kind kind = spread_kind::uniform;
    std::vector<double> numbers;
    std::uint32_t stream = 0; ///< random stream, a function of the name alone
};

/// Rank correlation (Spearman) between drawn parameters through a Gaussian copula.
struct correlation_description {
    std::vector<int> parameters;          ///< columns
    std::vector<double> rank_correlation; ///< their matrix, row by row
};

struct study_description {
    loop_description loop;
    std::vector<measure_description> measures;
    std::vector<spread_description> spreads; ///< one a drawn parameter, in column order
    std::vector<correlation_description> correlations;
    std::uint64_t seed = 0;
};

} // namespace windage
