// Hands out blocks in order, gathers what is done, and stops everybody on a cancel or an error.
//
// Any thread may call any function at any time, except `rethrow` and `finished_prefix`: those are for the thread that
// has joined all others.
#pragma once

#include <atomic>
#include <cstdint>
#include <exception>
#include <mutex>
#include <vector>

namespace windage {

class work_queue {
public:
    explicit work_queue(std::uint64_t blocks) : blocks_(blocks), finished_(std::size_t(blocks)) {}

    /// The next block that nobody has; false when there is none or the run is over.
    bool take(std::uint64_t& block) {
        if (!keep_going()) return false;
        block = next_.fetch_add(1, std::memory_order_relaxed);
        return block < blocks_;
    }

    /// A block has written its results.
    void finish(std::uint64_t block, std::uint64_t trials) {
        finished_[std::size_t(block)] = 1;
        done_.fetch_add(trials, std::memory_order_relaxed);
    }

    void cancel() { cancelled_.store(true, std::memory_order_relaxed); }
    bool keep_going() const { return !cancelled_.load(std::memory_order_relaxed); }

    /// Trials of finished blocks.
    std::uint64_t done() const { return done_.load(std::memory_order_relaxed); }

    /// Runs f; the first exception of any thread ends the run and is thrown again by `rethrow`.
    template <class F> void guard(F&& f) noexcept {
        try {
            f();
        } catch (...) {
            const std::lock_guard lock(error_mutex_);
            if (!error_) error_ = std::current_exception();
            cancel();
        }
    }

    void rethrow() const {
        if (error_) std::rethrow_exception(error_);
    }

    /// Blocks that are finished without a gap from the first on.
    std::uint64_t finished_prefix() const {
        std::uint64_t n = 0;
        while (n < blocks_ && finished_[std::size_t(n)]) ++n;
        return n;
    }

private:
    std::uint64_t blocks_;
    std::vector<char> finished_; // one writer each
    std::atomic<std::uint64_t> next_{0}, done_{0};
    std::atomic<bool> cancelled_{false};
    std::mutex error_mutex_;
    std::exception_ptr error_;
};

} // namespace windage
