// Hands out blocks in order, gathers what is done, and stops everybody on a cancel or an error.
//
// Workers touch atomics only. The progress callback runs on the thread that called `run` and nowhere else, because it
// may lead into Python: that thread looks at the clock whenever a block asks whether to go on.
#pragma once

#include <atomic>
#include <chrono>
#include <cstdint>
#include <exception>
#include <functional>
#include <mutex>
#include <thread>
#include <vector>

namespace windage {

class work_queue {
public:
    work_queue(std::uint64_t blocks, std::function<bool(std::uint64_t)> progress)
        : blocks_(blocks), finished_(std::size_t(blocks)), progress_(std::move(progress)),
          caller_(std::this_thread::get_id()), last_report_(clock::now()) {}

    /// The next block that nobody has; false when there is none or the run is over.
    bool take(std::uint64_t& block) {
        if (cancelled_.load(std::memory_order_relaxed)) return false;
        block = next_.fetch_add(1, std::memory_order_relaxed);
        return block < blocks_;
    }

    /// A block has written its results. The flags are read after all workers have joined.
    void finish(std::uint64_t block, std::uint64_t trials) {
        finished_[std::size_t(block)] = 1;
        done_.fetch_add(trials, std::memory_order_relaxed);
        keep_going();
    }

    bool keep_going() {
        if (progress_ && std::this_thread::get_id() == caller_ && clock::now() - last_report_ > interval) {
            if (!progress_(done_.load(std::memory_order_relaxed))) cancelled_ = true;
            last_report_ = clock::now();
        }
        return !cancelled_.load(std::memory_order_relaxed);
    }

    /// Runs f; the first exception of any worker ends the run and is thrown again by `rethrow`.
    template <class F> void guard(F&& f) {
        try {
            f();
        } catch (...) {
            const std::lock_guard lock(error_mutex_);
            if (!error_) error_ = std::current_exception();
            cancelled_ = true;
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
    using clock = std::chrono::steady_clock;
    static constexpr std::chrono::milliseconds interval{100};

    std::uint64_t blocks_;
    std::vector<char> finished_; // one writer each
    std::function<bool(std::uint64_t)> progress_;
    std::thread::id caller_;
    clock::time_point last_report_;
    std::atomic<std::uint64_t> next_{0}, done_{0};
    std::atomic<bool> cancelled_{false};
    std::mutex error_mutex_;
    std::exception_ptr error_;
};

} // namespace windage
