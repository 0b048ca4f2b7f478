// Lane functions by name, with the wide pack of this build.
#include <windage/lanes/catalogue.hpp>

#include <stdexcept>
#include <string>

#include <windage/lanes/catalogue_loops.hpp>

namespace windage {

const std::vector<elementary_entry>& elementary_names() {
    static const std::vector<elementary_entry> names = [] {
        std::vector<elementary_entry> all;
        for (const auto& entry : detail::catalogue<lanes>) all.push_back({entry.name, entry.arguments});
        return all;
    }();
    return names;
}

void apply_elementary(std::string_view name, const double* x, const double* y, double* out, std::size_t n) {
    for (const auto& entry : detail::catalogue<lanes>) {
        if (entry.name != name) continue;
        if ((entry.arguments == 2) != (y != nullptr))
            throw std::invalid_argument("lane function '" + std::string(name) + "' takes " +
                                        std::to_string(entry.arguments) + " argument(s); " +
                                        (y ? "two were given: leave the second out." : "one was given: add a second."));
        return entry.apply(x, y, out, n);
    }
    std::string known;
    for (const auto& entry : detail::catalogue<lanes>) known += (known.empty() ? "" : ", ") + std::string(entry.name);
    throw std::invalid_argument("lane function '" + std::string(name) + "' is not known; use one of: " + known + ".");
}

void apply_uniforms(stream_key key, std::uint32_t draw, std::uint64_t first_trial, double* a, double* b,
                    std::size_t n) {
    detail::apply_draws<lanes, detail::draw_kind::uniform>(key, draw, first_trial, a, b, n);
}

void apply_normals(stream_key key, std::uint32_t draw, std::uint64_t first_trial, double* a, double* b, std::size_t n) {
    detail::apply_draws<lanes, detail::draw_kind::normal>(key, draw, first_trial, a, b, n);
}

} // namespace windage
