// Reads the fields of a Python dict into a description, and refuses what it does not know.
// Messages name the path of the field, for example "study.loop.sensor.gain".
#pragma once

#include <set>
#include <stdexcept>
#include <string>
#include <utility>
#include <vector>

#include <pybind11/pybind11.h>

#include <windage/lanes/number.hpp>

namespace windage::bindings {

namespace py = pybind11;

/// Names of the enumerators of E in their order; specialised for each enumeration in describe.cpp.
template <class E> std::vector<std::string> enumerators();

inline number read_number(py::handle value, const std::string& path) {
    if (py::isinstance<py::tuple>(value)) {
        const auto pair = value.cast<py::tuple>();
        if (pair.size() == 2 && py::isinstance<py::str>(pair[0]) && pair[0].cast<std::string>() == "drawn") {
            const int column = pair[1].cast<int>();
            if (column >= 0) return number::drawn(column);
        }
    } else if (PyFloat_Check(value.ptr()) || PyLong_Check(value.ptr())) {
        return number(value.cast<double>());
    }
    throw std::invalid_argument(path + ": expected a number or ('drawn', column)");
}

/// The enumerator of E that a name stands for.
template <class E> E read_enumerator(py::handle value, const std::string& path) {
    const auto names = enumerators<E>();
    const auto wanted = py::str(value).cast<std::string>();
    for (std::size_t i = 0; i < names.size(); ++i)
        if (names[i] == wanted) return E(i);
    throw std::invalid_argument(path + ": '" + wanted + "' is not known");
}

class dict_reader {
public:
    dict_reader(py::handle source, std::string path) : path_(std::move(path)) {
        if (!py::isinstance<py::dict>(source)) throw std::invalid_argument(path_ + ": expected a dict");
        source_ = source.cast<py::dict>();
    }

    const std::string& path() const { return path_; }

    /// Reads `name` into `to` by `read(handle, path)` where it is present.
    template <class T, class Read> dict_reader& field(const char* name, T& to, Read&& read) {
        known_.insert(name);
        if (!source_.contains(name)) return *this;
        to = read(source_[name], path_ + "." + name);
        return *this;
    }

    template <class T> dict_reader& plain(const char* name, T& to) {
        return field(name, to, [](py::handle value, const std::string& path) {
            try {
                return value.cast<T>();
            } catch (const py::cast_error&) {
                throw std::invalid_argument(path + ": has the wrong type");
            }
        });
    }
    dict_reader& number_field(const char* name, number& to) { return field(name, to, read_number); }
    dict_reader& numbers(const char* name, std::vector<number>& to) { return list(name, to, read_number); }

    template <class E> dict_reader& choice(const char* name, E& to) { return field(name, to, read_enumerator<E>); }

    template <class T, class Read> dict_reader& list(const char* name, std::vector<T>& to, Read&& read) {
        return field(name, to, [&](py::handle value, const std::string& path) {
            std::vector<T> all;
            for (py::handle item : value) all.push_back(read(item, path + "[" + std::to_string(all.size()) + "]"));
            return all;
        });
    }

    /// Refuses keys that nothing has asked for.
    void finish() const {
        for (auto item : source_)
            if (const auto key = py::str(item.first).cast<std::string>(); !known_.contains(key))
                throw std::invalid_argument(path_ + ": unknown key '" + key + "'");
    }

private:
    py::dict source_;
    std::string path_;
    std::set<std::string> known_;
};

} // namespace windage::bindings
