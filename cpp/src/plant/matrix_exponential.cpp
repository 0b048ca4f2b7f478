#include <windage/plant/matrix_exponential.hpp>

namespace windage {

Eigen::MatrixXd matrix_exponential(const Eigen::MatrixXd& a) {
    constexpr int degree = 16;         // remainder below 2^-53 for a norm of 1/2
    constexpr int most_squarings = 60; // beyond, the result is not finite in any case
    int squarings = 0;
    double scale = 1.0;
    for (double norm = a.cwiseAbs().rowwise().sum().maxCoeff(); norm > 0.5 && squarings < most_squarings; norm *= 0.5) {
        scale *= 0.5;
        ++squarings;
    }
    const Eigen::MatrixXd scaled = scale * a, one = Eigen::MatrixXd::Identity(a.rows(), a.cols());
    Eigen::MatrixXd sum = one, product(a.rows(), a.cols());
    for (int k = degree; k >= 1; --k) {
        product = scaled.lazyProduct(sum);
        sum = one + (1.0 / k) * product;
    }
    for (int k = 0; k < squarings; ++k) {
        product = sum.lazyProduct(sum);
        sum.swap(product);
    }
    return sum;
}

} // namespace windage
