// Where functions of time are not smooth.
#include <limits>

#include <windage/loop/time_function.hpp>

namespace windage {
namespace {

/// Keeps the earliest of the times that come after `now`.
class earliest_after {
public:
    explicit earliest_after(double now) : now_(now) {}
    void consider(double time) {
        if (time > now_ && time < found_) found_ = time;
    }
    double found() const { return found_; }

private:
    double now_, found_ = std::numeric_limits<double>::infinity();
};

} // namespace

bool time_function::has_common_breaks() const { return has_common_numbers_ || is_constant(); }

double time_function::next_break(double t, std::size_t lane) const {
    earliest_after next(t + allowance_[lane]);
    const auto number = [&](std::size_t k) { return numbers_[k][lane]; };
    switch (kind_) {
    case time_function_kind::constant: break;
    case time_function_kind::step: next.consider(number(1)); break;
    case time_function_kind::sine: next.consider(number(4)); break;
    case time_function_kind::ramp:
        next.consider(number(1));
        next.consider(number(2));
        break;
    case time_function_kind::pulse:
    case time_function_kind::quintic: // its third derivative jumps
        next.consider(number(1));
        next.consider(number(1) + number(2));
        break;
    case time_function_kind::jerk_limited: { // so does that of its position
        const double start = number(1), total = derived_[4][lane];
        const double phases[] = {0.0, derived_[2][lane], derived_[3][lane] - derived_[2][lane], derived_[3][lane]};
        for (const double phase : phases) {
            next.consider(start + phase);
            next.consider(start + (total - phase)); // the motion is its own mirror image in time
        }
        break;
    }
    case time_function_kind::sum:
        for (const time_function& term : terms_) next.consider(term.next_break(t, lane));
        break;
    case time_function_kind::table_linear:
    case time_function_kind::table_hold: return next_table_time(t + allowance_[lane], lane);
    }
    return next.found();
}

double time_function::next_table_time(double now, std::size_t lane) const {
    if (numbers_[0][lane] > now) return numbers_[0][lane];
    const std::size_t next = table_row(now, lane, 0) + 1;
    return next < numbers_.size() / 2 ? numbers_[next][lane] : std::numeric_limits<double>::infinity();
}

} // namespace windage
