#include "describe.hpp"

#include <pybind11/stl.h>

#include "dict_reader.hpp"

namespace windage::bindings {

template <> std::vector<std::string> enumerators<plant_kind>() {
    return {"equations",         "integrator_chain", "first_order", "second_order",
            "transfer_function", "state_space",      "dc_drive",    "two_mass_drive"};
}
template <> std::vector<std::string> enumerators<integrator_kind>() {
    return {"euler", "rk4", "cash_karp5", "reference"};
}
template <> std::vector<std::string> enumerators<adrc_form>() { return {"output", "error"}; }
template <> std::vector<std::string> enumerators<discretisation_kind>() { return {"zero_order_hold", "euler"}; }
template <> std::vector<std::string> enumerators<observer_input_kind>() { return {"limited", "commanded"}; }
template <> std::vector<std::string> enumerators<observer_start_kind>() { return {"zero", "measured"}; }
template <> std::vector<std::string> enumerators<time_function_kind>() {
    return {"constant", "step",         "ramp",         "sine",       "pulse",
            "quintic",  "jerk_limited", "table_linear", "table_hold", "sum"};
}
template <> std::vector<std::string> enumerators<noise_kind>() { return {"gauss_markov", "white"}; }
template <> std::vector<std::string> enumerators<spread_kind>() {
    return {"normal", "uniform", "triangular", "lognormal", "beta", "choice", "samples", "rows", "drawn_rows"};
}
template <> std::vector<std::string> enumerators<source_kind>() {
    return {"time", "state", "plant_input", "disturbance", "value", "signal"};
}
template <> std::vector<std::string> enumerators<measure_kind>() {
    return {"peak",
            "minimum",
            "maximum",
            "mean",
            "rms",
            "standard_deviation",
            "final_value",
            "integral_absolute",
            "integral_square",
            "integral_time_absolute",
            "total_variation",
            "rms_change",
            "time_outside",
            "time_at_limits",
            "overshoot",
            "undershoot",
            "rise_time",
            "settling_time",
            "settling_time_absolute",
            "peak_to_peak",
            "reversals",
            "time_of_peak",
            "difference",
            "ratio"};
}

namespace {

py::sequence sequence_of(py::handle value, std::size_t length, const std::string& path) {
    if (!py::isinstance<py::sequence>(value) || py::len(value) != length)
        throw std::invalid_argument(path + ": expected " + std::to_string(length) + " items");
    return value.cast<py::sequence>();
}

program_input read_input(py::handle value, const std::string& path) {
    const py::sequence items = sequence_of(value, 4, path);
    program_input input;
    input.kind = read_enumerator<source_kind>(items[0], path);
    input.index = items[1].cast<int>();
    input.value = read_number(items[2], path);
    input.signal = items[3].cast<std::string>();
    return input;
}

instruction read_instruction(py::handle value, const std::string& path) {
    const py::sequence items = sequence_of(value, 5, path);
    return {operation_named(items[0].cast<std::string>()), items[1].cast<int>(), items[2].cast<int>(),
            items[3].cast<int>(), items[4].cast<double>()};
}

program read_program(py::handle source, const std::string& path) {
    program p;
    dict_reader r(source, path);
    r.list("inputs", p.inputs, read_input).list("code", p.code, read_instruction).plain("outputs", p.outputs);
    r.finish();
    check(p);
    return p;
}

plant_description read_plant(py::handle source, const std::string& path) {
    plant_description d;
    dict_reader r(source, path);
    r.choice("kind", d.kind)
        .plain("states", d.states)
        .numbers("initial_state", d.initial_state)
        .numbers("numbers", d.numbers)
        .plain("order", d.order)
        .plain("output_state", d.output_state)
        .plain("disturbances", d.disturbances)
        .number_field("dead_time", d.dead_time)
        .field("derivatives", d.derivatives, read_program)
        .field("output", d.output, read_program);
    r.finish();
    return d;
}

controller_description read_controller(py::handle source, const std::string& path) {
    controller_description d;
    dict_reader r(source, path);
    r.choice("form", d.form)
        .plain("order", d.order)
        .number_field("controller_bandwidth", d.controller_bandwidth)
        .number_field("observer_bandwidth", d.observer_bandwidth)
        .number_field("b0", d.b0)
        .numbers("controller_gains", d.controller_gains)
        .numbers("observer_gains", d.observer_gains)
        .number_field("controller_gain_factor", d.controller_gain_factor)
        .number_field("observer_gain_factor", d.observer_gain_factor)
        .choice("discretisation", d.discretisation)
        .choice("observer_input", d.observer_input)
        .choice("observer_start", d.observer_start)
        .plain("reference_derivatives", d.reference_derivatives)
        .plain("cancel_disturbance", d.cancel_disturbance);
    r.finish();
    return d;
}

// A term of a sum is no sum itself: the depth of a description does not come from outside.
time_function_description read_term(py::handle source, const std::string& path) {
    time_function_description d;
    dict_reader r(source, path);
    r.choice("kind", d.kind).numbers("numbers", d.numbers);
    r.finish();
    if (d.kind == time_function_kind::sum) throw std::invalid_argument(path + ": a term that is no sum is expected");
    return d;
}

time_function_description read_time_function(py::handle source, const std::string& path) {
    time_function_description d;
    dict_reader r(source, path);
    r.choice("kind", d.kind).numbers("numbers", d.numbers).list("terms", d.terms, read_term);
    r.finish();
    return d;
}

noise_description read_noise(py::handle source, const std::string& path) {
    noise_description d;
    dict_reader r(source, path);
    r.choice("kind", d.kind).numbers("numbers", d.numbers).plain("stream", d.stream);
    r.finish();
    return d;
}

disturbance_description read_disturbance(py::handle source, const std::string& path) {
    disturbance_description d;
    dict_reader r(source, path);
    r.plain("name", d.name).field("function", d.function, read_time_function).list("noises", d.noises, read_noise);
    r.finish();
    return d;
}

sensor_description read_sensor(py::handle source, const std::string& path) {
    sensor_description d;
    dict_reader r(source, path);
    r.number_field("delay", d.delay)
        .number_field("gain", d.gain)
        .number_field("bias", d.bias)
        .number_field("noise", d.noise)
        .number_field("filter_frequency", d.filter_frequency)
        .number_field("resolution", d.resolution)
        .number_field("low", d.low)
        .number_field("high", d.high)
        .plain("has_range", d.has_range)
        .plain("stream", d.stream);
    r.finish();
    return d;
}

actuator_description read_actuator(py::handle source, const std::string& path) {
    actuator_description d;
    dict_reader r(source, path);
    r.number_field("low", d.low)
        .number_field("high", d.high)
        .plain("has_limits", d.has_limits)
        .number_field("rate_limit", d.rate_limit)
        .number_field("resolution", d.resolution)
        .number_field("delay", d.delay)
        .number_field("time_constant", d.time_constant)
        .number_field("initial", d.initial)
        .plain("delay_is_whole", d.delay_is_whole);
    r.finish();
    return d;
}

expression_description read_expression(py::handle source, const std::string& path) {
    expression_description d;
    dict_reader r(source, path);
    r.plain("name", d.name).field("formula", d.formula, read_program);
    r.finish();
    return d;
}

loop_description read_loop(py::handle source, const std::string& path) {
    loop_description d;
    dict_reader r(source, path);
    r.field("plant", d.plant, read_plant)
        .field("controller", d.controller, read_controller)
        .number_field("sample_period", d.sample_period)
        .number_field("duration", d.duration)
        .field("reference", d.reference, read_time_function)
        .list("disturbances", d.disturbances, read_disturbance)
        .field("sensor", d.sensor, read_sensor)
        .field("actuator", d.actuator, read_actuator)
        .choice("integrator", d.integrator)
        .plain("steps_per_sample", d.steps_per_sample)
        .plain("reference_tolerance", d.reference_tolerance)
        .list("expressions", d.expressions, read_expression)
        .plain("input_name", d.input_name)
        .plain("output_name", d.output_name);
    r.finish();
    return d;
}

correlation_description read_correlation(py::handle source, const std::string& path) {
    correlation_description d;
    dict_reader r(source, path);
    r.plain("parameters", d.parameters).plain("rank_correlation", d.rank_correlation);
    r.finish();
    return d;
}

// A list that holds itself would be read for ever.
measure_description read_operand(py::handle source, const std::string& path) {
    constexpr std::size_t longest_path = 1000;
    if (path.size() > longest_path) throw std::invalid_argument("measure: operands within operands without end");
    return read_measure(source, path);
}

} // namespace

measure_description read_measure(py::handle source, const std::string& path) {
    measure_description d;
    dict_reader r(source, path);
    r.choice("kind", d.kind)
        .plain("signal", d.signal)
        .number_field("after", d.after)
        .number_field("before", d.before)
        .number_field("a", d.a)
        .number_field("b", d.b)
        .list("operands", d.operands, read_operand);
    r.finish();
    return d;
}

spread_description read_spread(py::handle source, const std::string& path) {
    spread_description d;
    dict_reader r(source, path);
    r.plain("name", d.name).choice("kind", d.kind).plain("numbers", d.numbers).plain("stream", d.stream);
    r.finish();
    return d;
}

discretisation_kind read_discretisation(const std::string& name) {
    return read_enumerator<discretisation_kind>(py::str(name), "discretisation");
}

study_description read_study(py::handle source) {
    study_description d;
    dict_reader r(source, "study");
    r.field("loop", d.loop, read_loop)
        .list("measures", d.measures, read_measure)
        .list("spreads", d.spreads, read_spread)
        .list("correlations", d.correlations, read_correlation)
        .plain("seed", d.seed);
    r.finish();
    return d;
}

} // namespace windage::bindings
