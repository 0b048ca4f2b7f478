// A campaign: the trials of a study, run in parallel and in any order, with the same digits always.
//
// A trial is a pure function of (study, index): its parameters and its noise come from counter-based random streams,
// and its lanes do not see each other. Threads, block size and the range asked for decide only who computes it.
#pragma once

#include <cstddef>
#include <cstdint>
#include <functional>
#include <memory>
#include <string>
#include <vector>

#include <windage/campaign/description.hpp>

namespace windage {

enum class trial_status : std::uint8_t { finished = 0, diverged = 1 };

/// Trials in the order of their results: a range, or a list that the caller keeps alive.
struct trial_choice {
    std::uint64_t first = 0, count = 0;
    const std::uint64_t* listed = nullptr; ///< null: first, first + 1, ...

    std::uint64_t operator[](std::uint64_t i) const { return listed ? listed[i] : first + i; }
};

/// Where the results go: column c of the i-th trial at [c * stride + i]. The caller owns the memory.
struct result_columns {
    double* parameters = nullptr;
    double* measures = nullptr;
    std::uint8_t* status = nullptr;
    std::size_t stride = 0;
};

struct run_options {
    int threads = 0;            ///< 0: as many as the machine offers
    std::size_t block_size = 0; ///< trials simulated together; 0: chosen
    /// Called on the calling thread with the trials done so far: at once, about twenty times a second, and at the end;
    /// false cancels. What it throws ends the run and is thrown again.
    std::function<bool(std::uint64_t)> progress;
};

struct recording {
    std::vector<std::string> signals;
    std::size_t samples = 0;
    std::unique_ptr<double[]> values; ///< signal s at sample k: [s * samples + k]; none if it was stopped
};

class campaign {
public:
    /// Throws std::invalid_argument where the study cannot be run.
    explicit campaign(study_description study);
    ~campaign();
    campaign(campaign&&) noexcept;

    std::size_t parameters() const;
    std::size_t measures() const { return study_.measures.size(); }
    const std::vector<std::string>& signals() const { return signals_; }
    std::uint64_t trials_available() const;

    /// Runs the trials chosen. Returns how many results are valid from the first on: all, or fewer after a cancel.
    /// A trial that diverged has undefined measures. A trial's digits do not depend on which others are chosen.
    std::uint64_t run(const trial_choice& chosen, const result_columns& to, const run_options& options) const;

    /// Draws the parameters of the trials chosen and runs none of them; `to` needs parameters only.
    void draw(const trial_choice& chosen, const result_columns& to) const;

    /// One trial with every signal at every sample; the same digits as in `run`. `keep_going` is asked as the progress
    /// of a run is; once it says no, there are no samples.
    recording replay(std::uint64_t trial, const std::function<bool()>& keep_going) const;

private:
    void check(const trial_choice& chosen) const;

    study_description study_;
    std::vector<std::string> signals_;
    std::unique_ptr<class parameter_source> source_;
    std::size_t usual_block_ = 0; // trials
};

/// One measure over a recorded signal, by the code that measures trials. `target` is where a response should end.
double evaluate_measure(const measure_description& d, const std::vector<double>& time,
                        const std::vector<double>& values, double target, double sample_period);

} // namespace windage
