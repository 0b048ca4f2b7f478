#include <windage/loop/loop.hpp>

#include <algorithm>
#include <set>
#include <stdexcept>

#include <windage/control/linear_adrc.hpp>

#include "disturbance_bank.hpp"
#include "make_plant.hpp"

namespace windage {
namespace {

// A command that changes inside the interval does so at an instant that may differ from lane to lane, and so do the
// steps: only an unsplit interval of a common period keeps the stages of all lanes at the same times.
bool stages_are_uniform(const loop_description& d) {
    return d.sample_period.is_constant() && !delay_line::needs_split(d);
}

} // namespace

loop::loop(const loop_description& d, signal_arena& arena)
    : size_(arena.block_size()), clock_(d.sample_period, d.duration, arena),
      disturbances_(std::make_unique<disturbance_bank>(d.disturbances, clock_, stages_are_uniform(d), arena)),
      delay_(d, clock_.period(), arena), output_delay_(d, clock_.period(), arena),
      plant_(make_plant(d, {clock_.period(), delay_.fraction(), delay_.is_split(), output_delay_.probe()},
                        *disturbances_, arena)),
      reference_(d.reference, d.sample_period.is_constant(), clock_.period(), arena),
      sensor_(d.sensor, clock_, seen_output(), arena),
      controller_(std::make_unique<linear_adrc>(d.controller, clock_.period(), arena)),
      limiter_(d.actuator, clock_, controller_->output(), arena), error_(arena.take()) {
    if (!delay_.is_absent() || plant_->lagged_input()) delayed_input_ = arena.take();
    for (int i = 0; i <= controller_->reference_derivatives(); ++i) reference_signals_.push_back(arena.take());
    name_signals(d);
    for (const expression_description& e : d.expressions) add_expression(e, arena);
}

loop::~loop() = default;

void loop::begin(const trial_block& block) {
    clock_.begin(block);
    disturbances_->begin(block);
    reference_.begin(block);
    sensor_.begin(block);
    limiter_.begin(block);
    delay_.begin(block, limiter_.initial());
    output_delay_.begin(block);
    plant_->begin(block, limiter_.initial());
    controller_->begin(block, limiter_.initial());
    for (named_expression& e : expressions_) e.formula.begin(block);
    if (delayed_input_) limiter_.initial().copy_to(delayed_input_, size_);
}

void loop::sample(std::int64_t k) {
    clock_.tick(k, size_);
    if (k % settle_every == 0) settle_states();
    disturbances_->sample(k);
    plant_->evaluate_output(clock_.time(), input());
    reference_.sample(clock_, reference_signals_.data(), int(reference_signals_.size()) - 1);
    sample_error();
    output_delay_.sample(k, plant_->output(), plant_->probed_output());
    sensor_.sample(k);
    controller_->sample(k, reference_signals_.data(), sensor_.measured(), limiter_.command());
    limiter_.sample();
    delay_.sample(k, limiter_.command());
    if (delayed_input_)
        std::copy_n(plant_->lagged_input() ? plant_->lagged_input() : delay_.acting(), size_, delayed_input_);
    for (named_expression& e : expressions_) e.formula.run();
}

// Whatever is carried on from one sample to the next and decays; noises never rest.
void loop::settle_states() {
    plant_->settle_states();
    controller_->settle_states();
    sensor_.settle_states();
}

void loop::sample_error() {
    const constant_signal reference = reference_signals_[0], output = plant_->output();
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        (wide::load(reference + i) - wide::load(output + i)).store(error_ + i);
    });
}

void loop::advance() { plant_->advance({clock_.time(), delay_.before(), delay_.after()}); }

constant_signal loop::find(const std::string& name) const {
    const auto found = signals_.find(name);
    if (found == signals_.end()) throw std::invalid_argument("loop: there is no signal named '" + name + "'");
    return found->second;
}

void loop::mark_diverged(signal diverged) const {
    for_each_pack(size_, [&](std::size_t i) WINDAGE_LANE_LOOP {
        auto finite = is_finite(wide::load(plant_->state(0) + i));
        for (int s = 1; s < plant_->states(); ++s) finite = finite & is_finite(wide::load(plant_->state(s) + i));
        const auto running = wide::load(clock_.time() + i) <= clock_.end().pack_at(i);
        const wide before = wide::load(diverged + i);
        select(running & !finite, 1.0, before).store(diverged + i);
    });
}

void loop::name_signals(const loop_description& d) {
    signals_["time"] = clock_.time();
    signals_["reference"] = reference_signals_[0];
    signals_["error"] = error_;
    signals_["output"] = plant_->output();
    signals_["measured"] = sensor_.measured();
    signals_["command"] = limiter_.command();
    signals_["input"] = input();
    for (std::size_t i = 0; i < d.plant.states.size(); ++i) signals_[d.plant.states[i]] = plant_->state(int(i));
    for (std::size_t i = 0; i < d.disturbances.size(); ++i)
        signals_[d.disturbances[i].name] = disturbances_->now(int(i));
    for (int i = 0; i < controller_->estimates(); ++i)
        signals_["estimate_" + std::to_string(i + 1)] = controller_->estimate(i);
    if (!d.input_name.empty()) signals_.try_emplace(d.input_name, input());
    if (!d.output_name.empty()) signals_.try_emplace(d.output_name, plant_->output());
}

void loop::add_expression(const expression_description& e, signal_arena& arena) {
    if (e.formula.outputs.size() != 1)
        throw std::invalid_argument("expression '" + e.name + "': one output is expected");
    named_expression made{tape(e.formula, arena, tape::outputs::as_written), arena.take()};
    for (std::size_t i = 0; i < e.formula.inputs.size(); ++i) {
        const program_input& input = e.formula.inputs[i];
        if (input.kind == source_kind::signal)
            made.formula.bind_input(i, find(input.signal));
        else if (input.kind == source_kind::time)
            made.formula.bind_input(i, clock_.time());
        else if (input.kind != source_kind::value)
            throw std::invalid_argument("expression '" + e.name + "' may read signals, numbers and time only");
    }
    made.formula.bind_output(0, made.value);
    signals_[e.name] = made.value;
    expressions_.push_back(std::move(made));
}

std::vector<std::string> signal_names(const loop_description& d) {
    std::vector<std::string> names{"time", "reference", "error", "output", "measured", "command", "input"};
    for (const std::string& s : d.plant.states) names.push_back(s);
    for (const disturbance_description& w : d.disturbances) names.push_back(w.name);
    for (int i = 0; i <= d.controller.order; ++i) names.push_back("estimate_" + std::to_string(i + 1));
    std::set<std::string> known(names.begin(), names.end());
    const auto is_new = [&](const std::string& name) { return !name.empty() && known.insert(name).second; };
    for (const std::string& alias : {d.input_name, d.output_name})
        if (is_new(alias)) names.push_back(alias);
    for (const expression_description& e : d.expressions) {
        if (!is_new(e.name)) throw std::invalid_argument("expression '" + e.name + "': a signal has this name already");
        names.push_back(e.name);
    }
    return names;
}

} // namespace windage
