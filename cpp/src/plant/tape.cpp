#include <windage/plant/tape.hpp>

#include <algorithm>

#include "tape_builder.hpp"

namespace windage {

tape::tape(const program& source, signal_arena& arena, outputs mode, const std::vector<bool>& held)
    : size_(arena.block_size()) {
    check(source);
    tape_builder(source, held, arena, *this).build(mode == outputs::scaled);
}

void tape::begin(const trial_block& block) {
    for (auto [slot, value] : constants_) std::fill_n(slots_[slot], size_, value);
    for (auto [slot, value] : numbers_) {
        if (value.is_constant())
            std::fill_n(slots_[slot], size_, value.value);
        else
            std::copy_n(block.parameters + value.parameter * size_, size_, slots_[slot]);
    }
    execute(prologue_);
}

void tape::execute(const std::vector<step>& steps) const {
    for (const step& s : steps) s.run(slots_.data(), s.at.data(), size_);
}

} // namespace windage
