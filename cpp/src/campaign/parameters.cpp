#include <windage/campaign/parameters.hpp>

#include <algorithm>
#include <limits>
#include <stdexcept>

#include <Eigen/Cholesky>

#include <windage/lanes/elementary.hpp>
#include <windage/lanes/normal.hpp>
#include <windage/lanes/philox.hpp>

namespace windage {
namespace {

// A Gaussian copula with correlation r has rank correlation (6/pi) asin(r/2) (Kruskal 1958, JASA 53, 814-861).
double gaussian_correlation(double rank_correlation) {
    constexpr double sixth_of_pi = 0.52359877559829887308;
    return 2.0 * sine(pack<1>(sixth_of_pi * rank_correlation))[0];
}

} // namespace

parameter_source::parameter_source(const study_description& study)
    : seed_(study.seed), available_(std::numeric_limits<std::uint64_t>::max()), spreads_(study.spreads) {
    for (const spread_description& s : spreads_) {
        check(s);
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

double parameter_source::uniform(std::uint64_t trial, std::size_t column) const {
    pack<1> first, second;
    uniform_pair<1>(&trial, {seed_, spreads_[column].stream}, 0, first, second);
    return first[0];
}

void parameter_source::correlate(std::uint64_t trial, const copula& c, std::vector<double>& uniforms) const {
    const std::size_t n = c.columns.size();
    std::vector<double> independent(n);
    for (std::size_t i = 0; i < n; ++i) independent[i] = normal_quantile(uniform(trial, c.columns[i]));
    for (std::size_t i = 0; i < n; ++i) {
        double sum = 0.0;
        for (std::size_t k = 0; k <= i; ++k) sum += c.factor(i, k) * independent[k];
        // Stay inside the open unit interval, where every quantile is defined.
        uniforms[c.columns[i]] = std::clamp(normal_cdf(sum), 0x1p-53, 1.0 - 0x1p-53);
    }
}

void parameter_source::draw(std::uint64_t trial, double* values, std::size_t stride) const {
    std::vector<double> uniforms(spreads_.size());
    for (std::size_t i = 0; i < spreads_.size(); ++i) uniforms[i] = uniform(trial, i);
    for (const copula& c : copulas_) correlate(trial, c, uniforms);
    for (std::size_t i = 0; i < spreads_.size(); ++i) values[i * stride] = quantile(spreads_[i], uniforms[i], trial);
}

} // namespace windage
