// The most arithmetic one core can do in double precision, for the roofline: chains of operations on registers, long
// enough side by side to hide the latency. `separate`: as many multiplications as additions, each an instruction of its
// own, which is all that a build without contraction can use. `fused`: fused multiply-add, counted as two operations.
#include <chrono>
#include <utility>

namespace {

#if defined(__AVX512F__)
constexpr int lanes = 8;
#elif defined(__AVX__)
constexpr int lanes = 4;
#else
constexpr int lanes = 2;
#endif
constexpr int chains = lanes == 8 ? 24 : 12; // of the 32 or 16 registers
typedef double vector __attribute__((vector_size(8 * lanes)));

double seconds() { return std::chrono::duration<double>(std::chrono::steady_clock::now().time_since_epoch()).count(); }

// Keeps the compiler from seeing through the chains without costing an instruction.
inline void keep(vector& v) {
#if defined(__x86_64__)
    asm volatile("" : "+v"(v));
#else
    asm volatile("" : "+w"(v));
#endif
}

// The chains are named by constants, so that each stays in a register of its own.
template <class Operation, int... Chain>
double operations_per_second(Operation&& operate, int operations_per_element, std::integer_sequence<int, Chain...>) {
    vector v[chains] = {(1.0 + Chain - vector{})...};
    vector factor = 0.999999 - vector{}, term = 1e-6 - vector{};
    keep(factor);
    keep(term);
    constexpr long rounds = 1'000'000;
    const double start = seconds();
    for (long round = 0; round < rounds; ++round)
        ((v[Chain] = operate(Chain, v[Chain], factor, term), keep(v[Chain])), ...);
    const double taken = seconds() - start;
    return double(rounds) * chains * lanes * operations_per_element / taken;
}

constexpr std::make_integer_sequence<int, chains> every_chain;

} // namespace

extern "C" double separate() {
    const auto operate = [](int i, vector x, vector factor, vector term)
                             __attribute__((always_inline)) { return i % 2 ? x * factor : x + term; };
    return operations_per_second(operate, 1, every_chain);
}

extern "C" double fused() {
    const auto operate = [](int, vector x, vector factor, vector term) __attribute__((always_inline)) {
#if defined(__FMA__) || defined(__aarch64__)
        vector y;
        for (int lane = 0; lane < lanes; ++lane) y[lane] = __builtin_fma(x[lane], factor[lane], term[lane]);
        return y;
#else
        return x * factor + term;
#endif
    };
    return operations_per_second(operate, 2, every_chain);
}
