// The calling thread watches, others work: a run answers its caller from the first instant to the last.
//
// What is asked may lead into Python (progress, Ctrl-C), and only the thread that called may go there. If that thread
// worked too, it would answer between two samples of its own block and be silent while others finish theirs.
#pragma once

#include <chrono>
#include <condition_variable>
#include <functional>
#include <mutex>
#include <thread>

namespace windage {

/// Calls `work` on a thread of its own, and `ask` on this one: at once, then about twenty times a second until the work
/// ends. Returns as soon as it has. Neither may throw; how `ask` makes the work end early is between the two.
///
/// The thread lives as long as the call. A thread kept for the next call would be missing in a forked process, which
/// would wait for it for ever.
inline void watch(const std::function<void()>& work, const std::function<void()>& ask) {
    constexpr std::chrono::milliseconds interval{50};
    std::mutex mutex;
    std::condition_variable ended;
    bool is_over = false;
    std::thread worker([&] {
        work();
        const std::lock_guard lock(mutex);
        is_over = true;
        ended.notify_one();
    });
    std::unique_lock lock(mutex);
    do {
        lock.unlock(); // the end of the work must not wait for an answer
        ask();
        lock.lock();
    } while (!ended.wait_for(lock, interval, [&] { return is_over; }));
    lock.unlock();
    worker.join();
}

} // namespace windage
