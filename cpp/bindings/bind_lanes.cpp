// The elementary functions and random streams of the engine, for the tests that hold them against other sources.
#include <array>

#include <pybind11/numpy.h>
#include <pybind11/pybind11.h>
#include <pybind11/stl.h>

#include <windage/lanes/beta.hpp>
#include <windage/lanes/catalogue.hpp>
#include <windage/lanes/philox.hpp>
#include <windage/lanes/signal.hpp>

#include "bind_engine.hpp"

namespace windage::bindings {

namespace py = pybind11;
using column = py::array_t<double, py::array::c_style | py::array::forcecast>;

namespace {

column lane_function(const std::string& name, const column& x, const std::optional<column>& y) {
    if (y && y->size() != x.size()) throw std::invalid_argument("lane_function: x and y differ in length");
    column out(x.size());
    apply_elementary(name, x.data(), y ? y->data() : nullptr, out.mutable_data(), std::size_t(x.size()));
    return out;
}

template <class Draw> column draws(std::size_t count, std::uint64_t first_trial, Draw&& draw) {
    column out({py::ssize_t(2), py::ssize_t(count)});
    for (std::size_t i = 0; i < count; i += lanes) {
        wide a, b;
        draw(first_trial + i, a, b);
        for (std::size_t lane = 0; lane < lanes && i + lane < count; ++lane) {
            out.mutable_data()[i + lane] = a[int(lane)];
            out.mutable_data()[count + i + lane] = b[int(lane)];
        }
    }
    return out;
}

column lane_uniforms(std::uint64_t seed, std::uint32_t stream, std::uint32_t draw, std::uint64_t first_trial,
                     std::size_t count) {
    return draws(count, first_trial, [&](std::uint64_t trial, wide& a, wide& b) {
        uniform_pair(trial, stream_key{seed, stream}, draw, a, b);
    });
}

column lane_normals(std::uint64_t seed, std::uint32_t stream, std::uint32_t draw, std::uint64_t first_trial,
                    std::size_t count) {
    return draws(count, first_trial, [&](std::uint64_t trial, wide& a, wide& b) {
        normal_pair(trial, stream_key{seed, stream}, draw, a, b);
    });
}

} // namespace

void bind_lanes(py::module_& m) {
    m.def("lane_function", lane_function, py::arg("name"), py::arg("x"), py::arg("y") = py::none());
    m.def(
        "lane_philox",
        [](std::array<std::uint32_t, 4> counter, std::array<std::uint32_t, 2> key) {
            return philox4x32_10(counter, key);
        },
        py::arg("counter"), py::arg("key"));
    m.def("lane_uniforms", lane_uniforms, py::arg("seed"), py::arg("stream"), py::arg("draw"), py::arg("first_trial"),
          py::arg("count"));
    m.def("incomplete_beta", incomplete_beta, py::arg("a"), py::arg("b"), py::arg("x"));
    m.def("incomplete_beta_inverse", incomplete_beta_inverse, py::arg("a"), py::arg("b"), py::arg("p"));
    m.def("lane_normals", lane_normals, py::arg("seed"), py::arg("stream"), py::arg("draw"), py::arg("first_trial"),
          py::arg("count"));
}

} // namespace windage::bindings
