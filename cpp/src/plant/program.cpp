#include <windage/plant/program.hpp>

#include <array>
#include <stdexcept>
#include <utility>

namespace windage {
namespace {

struct entry {
    const char* name;
    operation op;
    int operands;
};

constexpr std::array<entry, 39> table{{
    {"constant", operation::constant, 0},
    {"load", operation::load, 0},
    {"add", operation::add, 2},
    {"sub", operation::sub, 2},
    {"mul", operation::mul, 2},
    {"div", operation::div, 2},
    {"neg", operation::neg, 1},
    {"sqrt", operation::sqrt, 1},
    {"sin", operation::sin, 1},
    {"cos", operation::cos, 1},
    {"tan", operation::tan, 1},
    {"asin", operation::asin, 1},
    {"acos", operation::acos, 1},
    {"atan", operation::atan, 1},
    {"atan2", operation::atan2, 2},
    {"exp", operation::exp, 1},
    {"log", operation::log, 1},
    {"pow", operation::pow, 2},
    {"tanh", operation::tanh, 1},
    {"sinh", operation::sinh, 1},
    {"cosh", operation::cosh, 1},
    {"abs", operation::abs, 1},
    {"sign", operation::sign, 1},
    {"floor", operation::floor, 1},
    {"round", operation::round, 1},
    {"mod", operation::mod, 2},
    {"min", operation::min, 2},
    {"max", operation::max, 2},
    {"less", operation::less, 2},
    {"less_equal", operation::less_equal, 2},
    {"equal", operation::equal, 2},
    {"not_equal", operation::not_equal, 2},
    {"logical_and", operation::logical_and, 2},
    {"logical_or", operation::logical_or, 2},
    {"logical_not", operation::logical_not, 1},
    {"select", operation::select, 3},
    {"mul_add", operation::mul_add, 3},
    {"mul_sub", operation::mul_sub, 3},
    {"sub_mul", operation::sub_mul, 3},
}};

std::string at(std::size_t i) { return "program: instruction " + std::to_string(i); }

void check_instruction(const program& p, std::size_t i) {
    const instruction& in = p.code[i];
    if (in.op == operation::load) {
        if (in.a < 0 || std::size_t(in.a) >= p.inputs.size())
            throw std::invalid_argument(at(i) + " loads input " + std::to_string(in.a) + "; the program has " +
                                        std::to_string(p.inputs.size()) + " inputs");
        return;
    }
    const int operands[3] = {in.a, in.b, in.c};
    for (int k = 0; k < operand_count(in.op); ++k)
        if (operands[k] < 0 || std::size_t(operands[k]) >= i)
            throw std::invalid_argument(at(i) + " reads value " + std::to_string(operands[k]) +
                                        "; expected an earlier one");
}

} // namespace

operation operation_named(const std::string& name) {
    for (const entry& e : table)
        if (name == e.name) return e.op;
    throw std::invalid_argument("program: operation '" + name + "' is not known");
}

int operand_count(operation op) {
    for (const entry& e : table)
        if (op == e.op) return e.operands;
    return 1; // reciprocal
}

bool program::reads(source_kind kind) const {
    for (const instruction& in : code)
        if (in.op == operation::load && inputs[in.a].kind == kind) return true;
    return false;
}

void check(const program& p) {
    for (std::size_t i = 0; i < p.code.size(); ++i) check_instruction(p, i);
    for (int v : p.outputs)
        if (v < 0 || std::size_t(v) >= p.code.size())
            throw std::invalid_argument("program: output reads value " + std::to_string(v) + "; the program has " +
                                        std::to_string(p.code.size()) + " values");
}

} // namespace windage
