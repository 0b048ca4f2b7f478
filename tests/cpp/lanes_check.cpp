// Check program for the lanes floor: applies functions to binary doubles, prints hashes and times.
//
//   lanes_check names                                        names with the number of arguments
//   lanes_check apply NAME 1|wide < x.bin > out.bin          doubles in, doubles out (pairs x, y for two arguments)
//   lanes_check hash 1|wide                                  one hash a function over 10^6 arguments, and their total
//   lanes_check philox C0 C1 C2 C3 K0 K1                     the four words of philox4x32_10, hexadecimal
//   lanes_check uniforms|normals SEED STREAM DRAW FIRST COUNT 1|wide > out.bin    pairs a, b
//   lanes_check time                                         ns an element, arrays of 1024, best of many
// The hashes must be equal for every compiler, instruction set and pack width.
#include <algorithm>
#include <bit>
#include <chrono>
#include <cinttypes>
#include <cstdint>
#include <cstdio>
#include <cstdlib>
#include <cstring>
#include <string>
#include <string_view>
#include <vector>

#include <windage/lanes/beta.hpp>
#include <windage/lanes/catalogue_loops.hpp>

namespace {

using windage::stream_key;
using windage::detail::apply_draws;
using windage::detail::catalogue;
using windage::detail::catalogue_entry;
using windage::detail::draw_kind;

constexpr std::size_t hash_arguments = 1'000'000;

/// splitmix64 (G. L. Steele, D. Lea, C. H. Flood, OOPSLA 2014): arguments for the hashes.
struct bit_source {
    std::uint64_t state;
    std::uint64_t operator()() {
        std::uint64_t z = (state += 0x9e3779b97f4a7c15u);
        z = (z ^ (z >> 30)) * 0xbf58476d1ce4e5b9u;
        z = (z ^ (z >> 27)) * 0x94d049bb133111ebu;
        return z ^ (z >> 31);
    }
    double unit() { return double((*this)() >> 11) * 0x1p-53; }
};

/// Any bit pattern, moderate numbers, numbers in [-1, 1], and numbers of every size near 2^-20 ... 2^20, in turn.
double hash_argument(bit_source& source, std::size_t i) {
    switch (i % 4) {
    case 0: return std::bit_cast<double>(source());
    case 1: return 80.0 * source.unit() - 40.0;
    case 2: return 2.0 * source.unit() - 1.0;
    default: return (1.0 + source.unit()) * std::bit_cast<double>((1003 + source() % 41) << 52);
    }
}

/// FNV-1a over whole words. Undefined numbers count as one value: their bits carry no meaning and differ by machine.
struct word_hash {
    std::uint64_t value = 0xcbf29ce484222325u;
    void add(std::uint64_t word) {
        value = (value ^ word) * 0x100000001b3u;
        value ^= value >> 29;
    }
    void add(double x) { add(x == x ? std::bit_cast<std::uint64_t>(x) : std::uint64_t(0x7ff8000000000000u)); }
};

std::vector<double> read_doubles() {
    std::vector<double> values;
    double buffer[4096];
    for (std::size_t got; (got = std::fread(buffer, sizeof(double), 4096, stdin)) > 0;)
        values.insert(values.end(), buffer, buffer + got);
    return values;
}

void write_doubles(const std::vector<double>& values) {
    std::fwrite(values.data(), sizeof(double), values.size(), stdout);
}

int fail(const char* message) {
    std::fprintf(stderr, "lanes_check: %s\n", message);
    return 2;
}

template <int W> int apply(std::string_view name) {
    for (const catalogue_entry& entry : catalogue<W>) {
        if (entry.name != name) continue;
        const std::vector<double> given = read_doubles();
        const std::size_t n = given.size() / entry.arguments;
        std::vector<double> x(n), y(n), out(n);
        for (std::size_t i = 0; i < n; ++i) {
            x[i] = given[i * entry.arguments];
            y[i] = given[i * entry.arguments + entry.arguments - 1];
        }
        entry.apply(x.data(), y.data(), out.data(), n);
        write_doubles(out);
        return 0;
    }
    return fail("unknown function; see lanes_check names");
}

void report(word_hash& total, std::string_view name, word_hash hash) {
    std::printf("%-24.*s %016" PRIx64 "\n", int(name.size()), name.data(), hash.value);
    total.add(hash.value);
}

template <int W, draw_kind Kind> word_hash hash_draws() {
    constexpr std::size_t n = hash_arguments / 2;
    std::vector<double> a(n), b(n);
    // Across the boundary of the low trial word.
    apply_draws<W, Kind>(stream_key{0x0123456789abcdefu, 7}, 11, 0xffffffffu - n / 2, a.data(), b.data(), n);
    word_hash hash;
    for (std::size_t i = 0; i < n; ++i) {
        hash.add(a[i]);
        hash.add(b[i]);
    }
    return hash;
}

word_hash hash_beta() {
    bit_source source{5};
    word_hash hash;
    for (int i = 0; i < 2000; ++i) {
        const double a = 0.3 + 30.0 * source.unit(), b = 0.3 + 300.0 * source.unit(), p = source.unit();
        const double x = windage::incomplete_beta_inverse(a, b, p);
        hash.add(x);
        hash.add(windage::incomplete_beta(a, b, x));
        hash.add(windage::log_gamma(a));
    }
    return hash;
}

template <int W> int print_hashes() {
    word_hash total;
    std::vector<double> x(hash_arguments), y(hash_arguments), out(hash_arguments);
    bit_source source{1};
    for (std::size_t i = 0; i < hash_arguments; ++i) {
        x[i] = hash_argument(source, i);
        y[i] = hash_argument(source, i / 4);
    }
    for (const catalogue_entry& entry : catalogue<W>) {
        entry.apply(x.data(), y.data(), out.data(), hash_arguments);
        word_hash hash;
        for (double value : out) hash.add(value);
        report(total, entry.name, hash);
    }
    report(total, "uniforms", hash_draws<W, draw_kind::uniform>());
    report(total, "normals", hash_draws<W, draw_kind::normal>());
    report(total, "beta", hash_beta());
    std::printf("%-24s %016" PRIx64 "\n", "total", total.value);
    return 0;
}

int print_philox(char** words) {
    windage::philox_counter counter{};
    windage::philox_key key{};
    for (int i = 0; i < 4; ++i) counter[i] = std::uint32_t(std::strtoul(words[i], nullptr, 16));
    for (int i = 0; i < 2; ++i) key[i] = std::uint32_t(std::strtoul(words[4 + i], nullptr, 16));
    for (std::uint32_t word : windage::philox4x32_10(counter, key)) std::printf("%08" PRIx32 " ", word);
    std::printf("\n");
    return 0;
}

template <int W> int draws(draw_kind kind, char** words) {
    const stream_key key{std::strtoull(words[0], nullptr, 0), std::uint32_t(std::strtoul(words[1], nullptr, 0))};
    const std::uint32_t draw = std::uint32_t(std::strtoul(words[2], nullptr, 0));
    const std::uint64_t first = std::strtoull(words[3], nullptr, 0), n = std::strtoull(words[4], nullptr, 0);
    std::vector<double> a(n), b(n), out(2 * n);
    if (kind == draw_kind::uniform)
        apply_draws<W, draw_kind::uniform>(key, draw, first, a.data(), b.data(), n);
    else
        apply_draws<W, draw_kind::normal>(key, draw, first, a.data(), b.data(), n);
    for (std::size_t i = 0; i < n; ++i) {
        out[2 * i] = a[i];
        out[2 * i + 1] = b[i];
    }
    write_doubles(out);
    return 0;
}

/// Best of 200 short runs: the least disturbed one.
template <class Work> double nanoseconds(Work work, std::size_t elements) {
    double best = 1e9;
    for (int run = 0; run < 200; ++run) {
        const auto start = std::chrono::steady_clock::now();
        for (int repeat = 0; repeat < 10; ++repeat) work();
        const std::chrono::duration<double, std::nano> spent = std::chrono::steady_clock::now() - start;
        best = std::min(best, spent.count() / 10.0 / double(elements));
    }
    return best;
}

int print_times() {
    constexpr std::size_t n = 1024;
    alignas(64) static double x[n], y[n], out[n];
    for (std::size_t i = 0; i < n; ++i) {
        x[i] = 0.001 + 0.998 * double((i * 7919) % n) / double(n);
        y[i] = 4.0 * double((i * 613) % n) / double(n) - 2.0;
    }
    std::printf("%d lanes\n", windage::lanes);
    for (const catalogue_entry& entry : catalogue<windage::lanes>)
        std::printf("%-24.*s %6.2f ns\n", int(entry.name.size()), entry.name.data(),
                    nanoseconds([&] { entry.apply(x, y, out, n); }, n));
    const stream_key key{2026, 1};
    std::printf("%-24s %6.2f ns\n", "uniform",
                nanoseconds([&] { apply_draws<windage::lanes, draw_kind::uniform>(key, 3, 0, x, y, n); }, 2 * n));
    std::printf("%-24s %6.2f ns\n", "normal",
                nanoseconds([&] { apply_draws<windage::lanes, draw_kind::normal>(key, 3, 0, x, y, n); }, 2 * n));
    return 0;
}

} // namespace

int main(int count, char** words) {
    const std::string_view mode = count > 1 ? words[1] : "";
    const bool scalar = count > 2 && std::string_view(words[count - 1]) == "1";
    if (mode == "names") {
        for (const auto& entry : catalogue<1>)
            std::printf("%.*s %d\n", int(entry.name.size()), entry.name.data(), entry.arguments);
        return 0;
    }
    if (mode == "apply" && count == 4) return scalar ? apply<1>(words[2]) : apply<windage::lanes>(words[2]);
    if (mode == "hash" && count == 3) return scalar ? print_hashes<1>() : print_hashes<windage::lanes>();
    if (mode == "philox" && count == 8) return print_philox(words + 2);
    if ((mode == "uniforms" || mode == "normals") && count == 8) {
        const draw_kind kind = mode == "uniforms" ? draw_kind::uniform : draw_kind::normal;
        return scalar ? draws<1>(kind, words + 2) : draws<windage::lanes>(kind, words + 2);
    }
    if (mode == "time") return print_times();
    return fail("usage: names | apply NAME 1|wide | hash 1|wide | philox C0..C3 K0 K1 | "
                "uniforms|normals SEED STREAM DRAW FIRST COUNT 1|wide | time");
}
