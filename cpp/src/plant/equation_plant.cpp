#include <windage/plant/equation_plant.hpp>

#include <stdexcept>

namespace windage {
namespace {

void check_inputs(const program& p, const plant_description& d) {
    for (const program_input& input : p.inputs) {
        const bool is_known = (input.kind == source_kind::state && std::size_t(input.index) < d.states.size()) ||
                              (input.kind == source_kind::disturbance && input.index < d.disturbances) ||
                              input.kind == source_kind::plant_input || input.kind == source_kind::time ||
                              input.kind == source_kind::value;
        if (!is_known || input.index < 0)
            throw std::invalid_argument("plant: the equations read an input that the plant does not have");
    }
}

// Inputs that keep their value during an integration step: the command where no lag follows it, and held disturbances.
std::vector<bool> held_inputs(const program& p, bool has_lag, const plant_disturbances& w) {
    std::vector<bool> held;
    for (const program_input& input : p.inputs)
        held.push_back((input.kind == source_kind::plant_input && !has_lag) ||
                       (input.kind == source_kind::disturbance && w.are_held()));
    return held;
}

// The state that a program hands out as it is, if it does no more than that.
std::optional<int> state_handed_out(const program& p) {
    const instruction& in = p.code[p.outputs[0]];
    if (in.op != operation::load || p.inputs[in.a].kind != source_kind::state) return std::nullopt;
    return p.inputs[in.a].index;
}

const plant_description& checked(const plant_description& d, const plant_disturbances& w) {
    check_inputs(d.derivatives, d);
    check_inputs(d.output, d);
    if (d.derivatives.outputs.size() != d.states.size())
        throw std::invalid_argument("plant: one equation a state is expected");
    if (d.output.reads(source_kind::plant_input))
        throw std::invalid_argument("plant: an output that does not read the input is expected");
    if (d.output.outputs.size() != 1) throw std::invalid_argument("plant: one output is expected");
    if (w.count() != d.disturbances) throw std::invalid_argument("plant: one disturbance for each name is expected");
    return d;
}

} // namespace

equation_plant::equation_plant(const plant_description& d, const integration_settings& settings,
                               const plant_timing& timing, const plant_disturbances& w, signal_arena& arena)
    : ode_plant(checked(d, w), settings, timing, w, d.derivatives.reads(source_kind::time), arena),
      held_(held_inputs(d.derivatives, has_lag_, w)), held_bindings_(bindings(d.derivatives, held_, true)),
      moving_bindings_(bindings(d.derivatives, held_, false)), output_bindings_(bindings(d.output, {}, false)),
      output_state_(state_handed_out(d.output)), derivatives_(d.derivatives, arena, tape::outputs::scaled, held_),
      output_tape_(d.output, arena, tape::outputs::as_written), disturbances_(w), output_(arena.take()) {
    output_tape_.bind_output(0, output_);
}

std::vector<equation_plant::binding> equation_plant::bindings(const program& p, const std::vector<bool>& held,
                                                              bool wanted) {
    std::vector<binding> found;
    for (std::size_t i = 0; i < p.inputs.size(); ++i)
        if (p.inputs[i].kind != source_kind::value && (!held.empty() && held[i]) == wanted)
            found.push_back({i, p.inputs[i].kind, std::size_t(p.inputs[i].index)});
    return found;
}

void equation_plant::begin_plant(const trial_block& block) {
    derivatives_.begin(block);
    output_tape_.begin(block);
}

void equation_plant::bind(tape& t, const std::vector<binding>& which, const block_state& x, constant_signal time,
                          constant_signal command, const constant_signal* disturbances) {
    for (const binding& b : which) {
        if (b.kind == source_kind::state) t.bind_input(b.input, x[b.index]);
        if (b.kind == source_kind::time) t.bind_input(b.input, time);
        if (b.kind == source_kind::disturbance) t.bind_input(b.input, disturbances[b.index]);
        if (b.kind == source_kind::plant_input) t.bind_input(b.input, has_lag_ ? x[states_] : command);
    }
}

void equation_plant::begin_step(const block_state& x, const stage& s) {
    bind(derivatives_, held_bindings_, x, s.time, s.command, s.disturbances.data());
    derivatives_.bind_scale(s.step);
    derivatives_.begin_step();
}

void equation_plant::derivative(const block_state& x, block_state& dx, const stage& s) {
    bind(derivatives_, moving_bindings_, x, s.time, s.command, s.disturbances.data());
    for (int i = 0; i < states_; ++i) derivatives_.bind_output(i, dx[i]);
    derivatives_.run();
}

void equation_plant::evaluate_output(constant_signal time, constant_signal) {
    now_.resize(disturbances_.count());
    for (int k = 0; k < disturbances_.count(); ++k) now_[k] = disturbances_.now(k);
    output_between(time, now_);
}

// The output reads no input: it is not bound.
constant_signal equation_plant::output_between(constant_signal time, const std::vector<constant_signal>& disturbances) {
    if (output_state_) return output();
    bind(output_tape_, output_bindings_, x_, time, nullptr, disturbances.data());
    output_tape_.run();
    return output_;
}

} // namespace windage
