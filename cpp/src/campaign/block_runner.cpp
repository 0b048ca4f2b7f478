#include <windage/campaign/block_runner.hpp>

#include <algorithm>
#include <limits>

namespace windage {
namespace {

// A stop is looked for after so few samples because one of the reference integrator may take milliseconds.
constexpr std::int64_t look_for_stop_every = 4;

} // namespace

class block_runner::reference_targets final : public target_source {
public:
    explicit reference_targets(const loop& l) : loop_(l) {}
    void target(const window_end& end, signal out) const override {
        loop_.reference().evaluate_at_own_times(end.last_sample, end.ends_there, out);
    }

private:
    const loop& loop_;
};

block_runner::block_runner(const study_description& study, const parameter_source& source, std::size_t block_size)
    : arena_(block_size), source_(source), loop_(study.loop, arena_), trials_(block_size),
      parameters_(source.count() * block_size), diverged_(arena_.take()), result_(arena_.take()) {
    const measure_timing timing{loop_.clock().period(), loop_.clock().end()};
    const signal_finder find = [&](const std::string& name) { return loop_.find(name); };
    for (const measure_description& m : study.measures) measures_.push_back(make_measure(m, find, timing, arena_));
    block_ = {block_size, study.seed, trials_.data(), parameters_.data()};
}

// Lanes beyond the last trial repeat it: their results are not written.
void block_runner::begin(const trial_choice& chosen, std::uint64_t offset, std::size_t count) {
    for (std::size_t lane = 0; lane < block_.size; ++lane)
        trials_[lane] = chosen[offset + std::min<std::uint64_t>(lane, count - 1)];
    source_.draw(trials_.data(), block_.size, parameters_.data());
    loop_.begin(block_);
    const reference_targets targets(loop_);
    for (auto& m : measures_) m->begin(block_, targets);
    std::fill_n(diverged_, block_.size, 0.0);
}

bool block_runner::run(const trial_choice& chosen, std::uint64_t offset, std::size_t count, const result_columns& to,
                       const std::function<bool()>& keep_going) {
    begin(chosen, offset, count);
    const std::int64_t last = loop_.clock().last_sample();
    // A state that is not finite stays so, and a look now and then finds it; but where trials end at different times
    // a lane must not be blamed for what happens after its own end.
    const std::int64_t look_every = loop_.clock().end_is_uniform() ? 64 : 1;
    for (std::int64_t k = 0; k <= last; ++k) {
        loop_.sample(k);
        for (auto& m : measures_) m->update(loop_.clock().time());
        if (k % look_every == 0 || k == last) {
            loop_.mark_diverged(diverged_);
            if (all_diverged()) break;
        }
        if (k % look_for_stop_every == 0 && !keep_going()) return false;
        if (k < last) loop_.advance();
    }
    write(count, to, std::size_t(offset));
    return true;
}

bool block_runner::all_diverged() const {
    return std::all_of(diverged_, diverged_ + block_.size, [](double d) { return d != 0.0; });
}

void block_runner::write(std::size_t count, const result_columns& to, std::size_t offset) const {
    for (std::size_t p = 0; p < source_.count(); ++p)
        std::copy_n(parameters_.data() + p * block_.size, count, to.parameters + p * to.stride + offset);
    for (std::size_t i = 0; i < count; ++i)
        to.status[offset + i] = std::uint8_t(diverged_[i] != 0.0 ? trial_status::diverged : trial_status::finished);
    for (std::size_t m = 0; m < measures_.size(); ++m) {
        measures_[m]->finish(result_);
        for (std::size_t i = 0; i < count; ++i)
            to.measures[m * to.stride + offset + i] =
                diverged_[i] != 0.0 ? std::numeric_limits<double>::quiet_NaN() : result_[i];
    }
}

recording block_runner::replay(std::uint64_t trial, const std::vector<std::string>& names,
                               const std::function<bool()>& keep_going) {
    begin({trial, 1}, 0, 1);
    std::vector<constant_signal> sources;
    for (const std::string& name : names) sources.push_back(loop_.find(name));
    recording r;
    r.signals = names;
    // The block may hold longer trials only where lanes differ; here all lanes are the same trial.
    r.samples = std::size_t(loop_.clock().last_sample()) + 1;
    r.values = std::make_unique_for_overwrite<double[]>(names.size() * r.samples);
    for (std::size_t k = 0; k < r.samples; ++k) {
        if (std::int64_t(k) % look_for_stop_every == 0 && !keep_going()) return {};
        loop_.sample(std::int64_t(k));
        for (std::size_t s = 0; s < sources.size(); ++s) r.values[s * r.samples + k] = sources[s][0];
        if (k + 1 < r.samples) loop_.advance();
    }
    return r;
}

} // namespace windage
