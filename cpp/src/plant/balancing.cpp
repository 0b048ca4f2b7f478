#include <windage/plant/balancing.hpp>

namespace windage {
namespace {

constexpr int most_sweeps = 100; // about ten are usual; units in between are right too, only less even

// The power of two next to the square root of a ratio of positive numbers; one where it is not finite.
wide even_out(wide ratio) {
    const auto usable = (ratio > 0x1p-1000) & (ratio < 0x1p1000);
    const auto exponent =
        from_bits((bits_of(select(usable, ratio, 1.0)) >> 52) - std::int64_t(1022) + bits_of(wide(0x1.8p52)));
    const wide half = floor(0.5 * (exponent - 0x1.8p52)); // of the exponent, rounded up
    return from_bits(bits_of(wide(1.0)) + (bits_of(half + 0x1.8p52) << 52));
}

} // namespace

lane_matrix balanced_units(const lane_matrix& a) {
    const int n = a.rows();
    lane_matrix unit(n, 1), scaled = a;
    for (int i = 0; i < n; ++i) unit(i, 0) = 1.0;
    bool changes = n > 1;
    for (int sweep = 0; sweep < most_sweeps && changes; ++sweep) {
        changes = false;
        for (int i = 0; i < n; ++i) {
            wide row = 0.0, column = 0.0;
            for (int j = 0; j < n; ++j) {
                if (j == i) continue;
                row += absolute(scaled(i, j));
                column += absolute(scaled(j, i));
            }
            // A state that nothing moves, or that moves nothing, is measured by its own rate.
            const wide own = absolute(scaled(i, i)) * absolute(scaled(i, i));
            const auto is_free = row == 0.0, is_silent = column == 0.0;
            const wide by_column = own / column, by_row = own / row;
            row = select(is_free, by_column, row);
            column = select(is_silent, by_row, column);
            const wide factor = even_out(row / column);
            const auto better = column * factor + row / factor < 0.95 * (row + column);
            if (!any(better)) continue;
            changes = true;
            const wide f = select(better, factor, 1.0), inverse = 1.0 / f;
            unit(i, 0) *= f;
            for (int j = 0; j < n; ++j) {
                if (j == i) continue;
                scaled(i, j) *= inverse;
                scaled(j, i) *= f;
            }
        }
    }
    return unit;
}

} // namespace windage
