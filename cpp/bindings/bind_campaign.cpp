// Campaigns in Python: describe -> run(first, count) -> columns.
#include <pybind11/functional.h>
#include <pybind11/numpy.h>
#include <pybind11/pybind11.h>
#include <pybind11/stl.h>

#include <windage/campaign/campaign.hpp>
#include <windage/campaign/parameters.hpp>
#include <windage/control/gains.hpp>
#include <windage/plant/refused_trial.hpp>

#include "bind_engine.hpp"
#include "describe.hpp"

namespace windage::bindings {

namespace py = pybind11;

namespace {

using column = py::array_t<double, py::array::c_style>;

using trial_list = py::array_t<std::uint64_t, py::array::c_style>;

void check_count(std::uint64_t count) {
    if (count > (std::uint64_t(1) << 40)) throw std::invalid_argument("count: more trials than memory can hold");
}

// What a run asks Python while it lasts, on the thread that called it: it is told of the trials done and answers
// whether to go on. Ctrl-C answers no; every other exception ends the run and is raised after it.
class question {
public:
    explicit question(const py::object& progress) : progress_(progress) {}

    /// Takes the lock of the interpreter for its own length: the run has given it back, and its workers never want it.
    bool ask(std::uint64_t done) {
        const py::gil_scoped_acquire lock;
        try {
            if (PyErr_CheckSignals() != 0) throw py::error_already_set();
            return progress_.is_none() || progress_(done).cast<bool>();
        } catch (py::error_already_set& e) {
            if (!e.matches(PyExc_KeyboardInterrupt)) failure_ = e.value();
            return false;
        }
    }

    void raise() const {
        if (failure_.is_none()) return;
        PyErr_SetObject(py::type::of(failure_).ptr(), failure_.ptr());
        throw py::error_already_set();
    }

private:
    const py::object& progress_;
    py::object failure_ = py::none();
};

py::tuple run(const campaign& c, const trial_choice& chosen, int threads, std::size_t block_size,
              const py::object& progress) {
    if (threads < 0) throw std::invalid_argument("threads: expected 0 or more");
    check_count(chosen.count);
    const auto n = py::ssize_t(chosen.count);
    column parameters({py::ssize_t(c.parameters()), n}), measures({py::ssize_t(c.measures()), n});
    py::array_t<std::uint8_t> status(n);
    const result_columns to{parameters.mutable_data(), measures.mutable_data(), status.mutable_data(), chosen.count};

    question python(progress);
    run_options options;
    options.threads = threads;
    options.block_size = block_size;
    options.progress = [&](std::uint64_t done) { return python.ask(done); };
    std::uint64_t completed = 0;
    {
        const py::gil_scoped_release unlock; // workers touch no Python object
        completed = c.run(chosen, to, options);
    }
    python.raise();
    return py::make_tuple(parameters, measures, status, completed);
}

py::tuple run_range(const campaign& c, std::uint64_t first, std::uint64_t count, int threads, std::size_t block_size,
                    const py::object& progress) {
    return run(c, {first, count}, threads, block_size, progress);
}

py::tuple run_chosen(const campaign& c, const trial_list& trials, int threads, std::size_t block_size,
                     const py::object& progress) {
    return run(c, {0, std::uint64_t(trials.size()), trials.data()}, threads, block_size, progress);
}

column draw(const campaign& c, std::uint64_t first, std::uint64_t count) {
    check_count(count);
    column parameters({py::ssize_t(c.parameters()), py::ssize_t(count)});
    c.draw({first, count}, {parameters.mutable_data(), nullptr, nullptr, count});
    return parameters;
}

column replay(const campaign& c, std::uint64_t trial, const py::object& progress) {
    question python(progress);
    recording r;
    {
        const py::gil_scoped_release unlock;
        r = c.replay(trial, [&] { return python.ask(0); });
    }
    python.raise();
    if (!r.values) return column(std::vector<py::ssize_t>{0, 0});
    const py::capsule owner(r.values.get(), [](void* values) { delete[] static_cast<double*>(values); });
    return column({py::ssize_t(r.signals.size()), py::ssize_t(r.samples)}, r.values.release(), owner);
}

column quantiles(const py::dict& source, const column& probabilities) {
    const spread_description s = prepared(read_spread(source, "spread"));
    column out(probabilities.size());
    for (py::ssize_t i = 0; i < probabilities.size(); ++i)
        out.mutable_data()[i] = quantile(s, probabilities.data()[i], std::uint64_t(i));
    return out;
}

column gains(int count, const std::function<void(wide*)>& place) {
    wide values[max_order + 1];
    place(values);
    column out(count);
    for (int i = 0; i < count; ++i) out.mutable_data()[i] = values[i][0];
    return out;
}

void check_order(int order) {
    if (order < 1 || order > max_order)
        throw std::invalid_argument("order: found " + std::to_string(order) + "; expected 1 to " +
                                    std::to_string(max_order));
}

double measure_recording(const py::dict& measure, const std::vector<double>& time, const std::vector<double>& values,
                         double target, double sample_period) {
    return evaluate_measure(read_measure(measure, "measure"), time, values, target, sample_period);
}

} // namespace

void bind_campaign(py::module_& m) {
    py::register_local_exception_translator([](std::exception_ptr thrown) {
        try {
            if (thrown) std::rethrow_exception(thrown);
        } catch (const refused_trial& e) {
            py::set_error(py::module_::import("windage._errors").attr("EngineError"), e.what());
        }
    });
    py::class_<campaign>(m, "Campaign", "A study made ready to run.")
        .def(py::init([](const py::dict& study) { return campaign(read_study(study)); }), py::arg("study"))
        .def("signal_names", &campaign::signals, "Names of the signals in the order of a replay.")
        .def_property_readonly("trials_available", &campaign::trials_available)
        .def(
            "run", run_range, py::arg("first"), py::arg("count"), py::arg("threads") = 0, py::arg("block_size") = 0,
            py::arg("progress") = py::none(),
            "Run trials; returns parameters (n, count), measures (n, count), status (count,) and the trials completed.")
        .def("run_chosen", run_chosen, py::arg("trials"), py::arg("threads") = 0, py::arg("block_size") = 0,
             py::arg("progress") = py::none(), "As `run`, for listed trials, in the order of the list.")
        .def("draw", draw, py::arg("first"), py::arg("count"), "Parameters of trials that are not run: (n, count).")
        .def("replay", replay, py::arg("trial"), py::arg("progress") = py::none(),
             "Every signal of one trial at every sample: (signals, samples); nothing if it was stopped.");
    m.def("evaluate_measure", measure_recording, py::arg("measure"), py::arg("time"), py::arg("values"),
          py::arg("target"), py::arg("sample_period"), "One measure over a recorded signal.");
    m.def("spread_quantiles", quantiles, py::arg("spread"), py::arg("probabilities"));
    m.def(
        "controller_gains",
        [](int order, double bandwidth) {
            check_order(order);
            return gains(order, [&](wide* to) { controller_gains(order, bandwidth, to); });
        },
        py::arg("order"), py::arg("controller_bandwidth"));
    m.def(
        "continuous_observer_gains",
        [](int order, double bandwidth) {
            check_order(order);
            return gains(order + 1, [&](wide* to) { continuous_observer_gains(order, bandwidth, to); });
        },
        py::arg("order"), py::arg("observer_bandwidth"));
    m.def(
        "observer_gains",
        [](int order, double bandwidth, double sample_period, const std::string& discretisation) {
            check_order(order);
            const auto kind = read_discretisation(discretisation);
            return gains(order + 1, [&](wide* to) { observer_gains(order, kind, bandwidth, sample_period, to); });
        },
        py::arg("order"), py::arg("observer_bandwidth"), py::arg("sample_period"),
        py::arg("discretisation") = "zero_order_hold");
}

} // namespace windage::bindings
