// A program: equations as straight-line arithmetic in static single assignment form.
// Value i is the result of instruction i; operands refer to earlier values only. Text is parsed elsewhere (Python);
// `check` refuses a malformed program, so that no input of any kind can make the tape read outside its values.
#pragma once

#include <string>
#include <vector>

#include <windage/lanes/number.hpp>

namespace windage {

enum class operation {
    constant,
    load,
    add,
    sub,
    mul,
    div,
    neg,
    sqrt,
    sin,
    cos,
    tan,
    asin,
    acos,
    atan,
    atan2,
    exp,
    log,
    pow,
    tanh,
    sinh,
    cosh,
    abs,
    sign,
    floor,
    round,
    mod,
    min,
    max,
    less,
    less_equal,
    equal,
    not_equal,
    logical_and,
    logical_or,
    logical_not,
    select,
    // made by the tape itself from the ones above
    mul_add,
    mul_sub,
    sub_mul,
    reciprocal,
};

/// Operation by the name used in descriptions ("add", "less_equal", ...); throws std::invalid_argument.
operation operation_named(const std::string& name);
/// Operands that an operation reads: 0 to 3.
int operand_count(operation op);

struct instruction {
    operation op = operation::constant;
    int a = -1, b = -1, c = -1; ///< operands: earlier values; for `load`, a is the index of the input
    double constant = 0.0;      ///< for `constant`
};

/// Where an input of a program comes from.
enum class source_kind { time, state, plant_input, disturbance, value, signal };

struct program_input {
    source_kind kind = source_kind::value;
    int index = 0;      ///< of the state or disturbance
    number value;       ///< for `value`: a constant or a drawn parameter
    std::string signal; ///< for `signal`: its name
};

struct program {
    std::vector<program_input> inputs;
    std::vector<instruction> code;
    std::vector<int> outputs; ///< values handed out

    bool reads(source_kind kind) const;
};

/// Throws std::invalid_argument naming the instruction that is out of order or reads what is not there.
void check(const program& p);

} // namespace windage
