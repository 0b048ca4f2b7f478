#include <windage/measure/measure.hpp>

#include <stdexcept>

#include <windage/measure/band_time.hpp>
#include <windage/measure/combination.hpp>
#include <windage/measure/response.hpp>
#include <windage/measure/shape.hpp>

#include "reduction.hpp"

namespace windage {

namespace {

std::unique_ptr<measure> make_combination(const measure_description& d, const signal_finder& find,
                                          const measure_timing& timing, signal_arena& arena) {
    if (d.operands.size() != 2)
        throw std::invalid_argument("measure: a difference or ratio takes 2 operands, not " +
                                    std::to_string(d.operands.size()));
    return std::make_unique<combination>(d.kind, make_measure(d.operands[0], find, timing, arena),
                                         make_measure(d.operands[1], find, timing, arena), arena);
}

} // namespace

std::unique_ptr<measure> make_measure(const measure_description& d, const signal_finder& find,
                                      const measure_timing& timing, signal_arena& arena) {
    const auto plain = [&]<class Reducer>(Reducer reducer) -> std::unique_ptr<measure> {
        return std::make_unique<reduction<Reducer>>(d, find(d.signal), timing, arena, std::move(reducer));
    };
    using namespace reducers;
    switch (d.kind) {
    case measure_kind::peak: return plain(peak{});
    case measure_kind::minimum: return plain(lowest{});
    case measure_kind::maximum: return plain(highest{});
    case measure_kind::mean: return plain(mean{});
    case measure_kind::rms: return plain(root_mean_square{});
    case measure_kind::standard_deviation: return plain(standard_deviation{});
    case measure_kind::final_value: return plain(final_value{});
    case measure_kind::integral_absolute: return plain(integral<magnitude>{});
    case measure_kind::integral_square: return plain(integral<square>{});
    case measure_kind::integral_time_absolute: return plain(integral<time_weighted_magnitude>{});
    case measure_kind::total_variation: return plain(total_variation{});
    case measure_kind::rms_change: return plain(rms_change{});
    case measure_kind::time_outside: return plain(band_time(d, false, arena));
    case measure_kind::time_at_limits: return plain(band_time(d, true, arena));
    case measure_kind::overshoot: return plain(excursion(false, arena));
    case measure_kind::undershoot: return plain(excursion(true, arena));
    case measure_kind::rise_time: return plain(rise_time(d, arena));
    case measure_kind::settling_time: return plain(settling_time(d, true, arena));
    case measure_kind::settling_time_absolute: return plain(settling_time(d, false, arena));
    case measure_kind::peak_to_peak: return plain(peak_to_peak{});
    case measure_kind::reversals: return plain(reversals(d, arena));
    case measure_kind::time_of_peak: return plain(time_of_peak{});
    case measure_kind::difference:
    case measure_kind::ratio: return make_combination(d, find, timing, arena);
    }
    throw std::invalid_argument("measure: unknown kind");
}

} // namespace windage
