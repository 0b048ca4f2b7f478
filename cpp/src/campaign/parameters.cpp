#include <windage/campaign/parameters.hpp>

#include <algorithm>
#include <limits>
#include <stdexcept>

#include <Eigen/Cholesky>

#include <windage/lanes/elementary.hpp>
#include <windage/lanes/normal.hpp>
#include <windage/lanes/philox.hpp>
#include <windage/lanes/signal.hpp>

namespace windage {
namespace {

// A Gaussian copula with correlation r has rank correlation (6/pi) asin(r/2) (Kruskal 1958, JASA 53, 814-861).
double gaussian_correlation(double rank_correlation) {
    constexpr double sixth_of_pi = 0.52359877559829887308;
    return 2.0 * sine(pack<1>(sixth_of_pi * rank_correlation))[0];
}

} // namespace

parameter_source::parameter_source(const study_description& study)
    : seed_(study.seed), available_(std::numeric_limits<std::uint64_t>::max()) {
    for (const spread_description& s : study.spreads) {
        spreads_.push_back(prepared(s));
        if (s.kind == spread_kind::rows) available_ = std::min<std::uint64_t>(available_, s.numbers.size());
    }
    for (const correlation_description& c : study.correlations) {
        const std::size_t n = c.parameters.size();
        if (c.rank_correlation.size() != n * n)
            throw std::invalid_argument("rank correlation: expected a square matrix, one row a parameter");
        Eigen::MatrixXd m(n, n);
        for (std::size_t i = 0; i < n; ++i) {
            if (c.parameters[i] < 0 || std::size_t(c.parameters[i]) >= spreads_.size())
                throw std::invalid_argument("rank correlation: no such parameter");
            for (std::size_t j = 0; j < n; ++j)
                m(i, j) = i == j ? 1.0 : gaussian_correlation(c.rank_correlation[i * n + j]);
        }
        const Eigen::LLT<Eigen::MatrixXd> factor(m);
        if (factor.info() != Eigen::Success)
            throw std::invalid_argument("rank correlation: the matrix is not positive definite; the correlations "
                                        "contradict each other");
        copulas_.push_back({c.parameters, factor.matrixL()});
    }
}

void parameter_source::draw(const std::uint64_t* trials, std::size_t size, double* values) const {
    for (std::size_t p = 0; p < spreads_.size(); ++p)
        for_each_pack(size, [&](std::size_t i) WINDAGE_LANE_LOOP {
            wide first, second;
            uniform_pair(trials + i, {seed_, spreads_[p].stream}, 0, first, second);
            first.store(values + p * size + i);
        });
    for (const copula& c : copulas_) correlate(c, size, values);
    for (std::size_t p = 0; p < spreads_.size(); ++p)
        for (std::size_t i = 0; i < size; ++i) {
            double& value = values[p * size + i];
            value = quantile(spreads_[p], value, trials[i]);
        }
}

void parameter_source::correlate(const copula& c, std::size_t size, double* uniforms) const {
    const std::size_t n = c.columns.size();
    std::vector<double> independent(n);
    for (std::size_t lane = 0; lane < size; ++lane) {
        const auto uniform = [&](std::size_t i) -> double& {
            return uniforms[std::size_t(c.columns[i]) * size + lane];
        };
        for (std::size_t i = 0; i < n; ++i) independent[i] = normal_quantile(uniform(i));
        for (std::size_t i = 0; i < n; ++i) {
            double sum = 0.0;
            for (std::size_t k = 0; k <= i; ++k) sum += c.factor(i, k) * independent[k];
            // Stay inside the open unit interval, where every quantile is defined.
            uniform(i) = std::clamp(normal_cdf(sum), 0x1p-53, 1.0 - 0x1p-53);
        }
    }
}

} // namespace windage
