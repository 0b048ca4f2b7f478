// The lane functions by name, over arrays: what the bindings, the tests and the measurements call.
//
// Guarantee: an element's result does not depend on the length of the array or its place in it (the wide pack and the
// scalar give the same bits). Arrays may not overlap except that `out` may equal an input.
#pragma once

#include <cstddef>
#include <cstdint>
#include <string_view>
#include <vector>

#include <windage/lanes/philox.hpp>

namespace windage {

struct elementary_entry {
    std::string_view name;
    int arguments; ///< 1 or 2
};

/// All names that apply_elementary knows, in a fixed order.
const std::vector<elementary_entry>& elementary_names();

/// out[i] = name(x[i]) or name(x[i], y[i]); y is null for functions of one argument.
/// Throws std::invalid_argument if the name is unknown or y does not suit it.
void apply_elementary(std::string_view name, const double* x, const double* y, double* out, std::size_t n);

/// Two uniforms a trial, for trials first_trial ... first_trial + n - 1.
void apply_uniforms(stream_key key, std::uint32_t draw, std::uint64_t first_trial, double* a, double* b, std::size_t n);
/// Two standard normal numbers a trial.
void apply_normals(stream_key key, std::uint32_t draw, std::uint64_t first_trial, double* a, double* b, std::size_t n);

} // namespace windage
