#include <stdexcept>

#include <windage/campaign/campaign.hpp>
#include <windage/measure/measure.hpp>

namespace windage {
namespace {

class constant_target final : public target_source {
public:
    constant_target(double value, std::size_t size) : value_(value), size_(size) {}
    void target(const window_end&, signal out) const override {
        for (std::size_t i = 0; i < size_; ++i) out[i] = value_;
    }

private:
    double value_;
    std::size_t size_;
};

void check_constant(const measure_description& d) {
    if (!d.after.is_constant() || !d.before.is_constant() || !d.a.is_constant() || !d.b.is_constant())
        throw std::invalid_argument("measure: a recorded signal has no drawn parameters");
    for (const measure_description& operand : d.operands) check_constant(operand);
}

} // namespace

double evaluate_measure(const measure_description& d, const std::vector<double>& time,
                        const std::vector<double>& values, double target, double sample_period) {
    if (time.size() != values.size() || time.empty())
        throw std::invalid_argument("measure: time and values need the same length, at least 1");
    check_constant(d);
    signal_arena arena(lanes);
    const signal now = arena.take(), x = arena.take(), result = arena.take();
    held_value period(true, arena), end(true, arena);
    const auto fill = [](signal s, double v) {
        for (int i = 0; i < lanes; ++i) s[i] = v;
    };
    period.fill([&](std::size_t) { return sample_period; });
    end.fill([&](std::size_t) { return time.back(); });
    const std::vector<std::uint64_t> trials(lanes, 0);
    const trial_block block{lanes, 0, trials.data(), nullptr};
    const auto m = make_measure(d, [&](const std::string&) { return x; }, {period, end}, arena);
    m->begin(block, constant_target(target, lanes));
    for (std::size_t k = 0; k < time.size(); ++k) {
        fill(now, time[k]);
        fill(x, values[k]);
        m->update(now);
    }
    m->finish(result);
    return result[0];
}

} // namespace windage
