// Runs the trials of one block after another. Each worker has its own; everything is allocated once.
#pragma once

#include <functional>
#include <memory>
#include <vector>

#include <windage/campaign/campaign.hpp>
#include <windage/campaign/parameters.hpp>
#include <windage/loop/loop.hpp>
#include <windage/measure/measure.hpp>

namespace windage {

class block_runner {
public:
    block_runner(const study_description& study, const parameter_source& source, std::size_t block_size);

    /// Runs `count` <= block size trials, the `offset`-th chosen and those after it, and writes them at `offset`.
    /// `keep_going` is asked now and then; returns false, with nothing written, once it says no.
    bool run(const trial_choice& chosen, std::uint64_t offset, std::size_t count, const result_columns& to,
             const std::function<bool()>& keep_going);

    /// One trial with the signals of these names; without samples once `keep_going` says no.
    recording replay(std::uint64_t trial, const std::vector<std::string>& names,
                     const std::function<bool()>& keep_going);

    std::size_t block_size() const { return arena_.block_size(); }
    /// Signals of a block, a measure of the memory that a sample touches.
    std::size_t signals() const { return arena_.signals(); }

private:
    class reference_targets;

    void begin(const trial_choice& chosen, std::uint64_t offset, std::size_t count);
    void write(std::size_t count, const result_columns& to, std::size_t offset) const;
    bool all_diverged() const;

    signal_arena arena_;
    const parameter_source& source_;
    loop loop_;
    std::vector<std::unique_ptr<measure>> measures_;
    std::vector<std::uint64_t> trials_;
    std::vector<double> parameters_;
    trial_block block_;
    signal diverged_, result_;
};

} // namespace windage
