#include <windage/campaign/campaign.hpp>

#include <algorithm>
#include <stdexcept>

#include <oneapi/tbb/global_control.h>
#include <oneapi/tbb/parallel_for.h>
#include <oneapi/tbb/partitioner.h>
#include <oneapi/tbb/task_arena.h>

#include <windage/campaign/block_runner.hpp>

#include "watch.hpp"
#include "work_queue.hpp"

namespace windage {
namespace {

// Measured (benchmarks/README.md): a longer block starts fewer passes, until its signals leave the first-level cache.
#ifdef WINDAGE_BLOCK
constexpr std::size_t block_of_few_signals = WINDAGE_BLOCK, block_of_many_signals = WINDAGE_BLOCK;
#else
constexpr std::size_t block_of_few_signals = 192, block_of_many_signals = 128;
#endif
constexpr std::size_t few_signals = 48;

std::size_t whole_packs(std::size_t trials) { return (trials + lanes - 1) / lanes * lanes; }

int threads_for(const run_options& options) {
    if (options.threads > 0) return options.threads;
    return std::max(1, oneapi::tbb::this_task_arena::max_concurrency());
}

// Few trials make small blocks, so that every thread has some; the digits do not depend on it.
std::size_t block_size_for(const run_options& options, std::uint64_t count, int threads, std::size_t usual_block) {
    if (options.block_size > 0) return whole_packs(options.block_size);
    const std::uint64_t share = (count + threads - 1) / threads;
    return std::min(usual_block, whole_packs(std::size_t(std::min<std::uint64_t>(share, usual_block))));
}

} // namespace

campaign::campaign(study_description study)
    : study_(std::move(study)), signals_(signal_names(study_.loop)),
      source_(std::make_unique<parameter_source>(study_)) {
    const block_runner probe(study_, *source_, lanes); // builds every stage, so that a bad description is refused here
    usual_block_ = probe.signals() <= few_signals ? block_of_few_signals : block_of_many_signals;
}

campaign::~campaign() = default;
campaign::campaign(campaign&&) noexcept = default;

std::size_t campaign::parameters() const { return source_->count(); }
std::uint64_t campaign::trials_available() const { return source_->trials_available(); }

void campaign::check(const trial_choice& chosen) const {
    const std::uint64_t available = trials_available();
    bool exists = chosen.listed || (chosen.first <= available && chosen.count <= available - chosen.first);
    for (std::uint64_t i = 0; chosen.listed && i < chosen.count; ++i) exists = exists && chosen.listed[i] < available;
    if (!exists)
        throw std::invalid_argument("run: more trials asked for than the table of parameter values has rows, " +
                                    std::to_string(available));
}

void campaign::draw(const trial_choice& chosen, const result_columns& to) const {
    check(chosen);
    std::vector<std::uint64_t> trials(usual_block_);
    std::vector<double> values(parameters() * usual_block_);
    for (std::uint64_t offset = 0; offset < chosen.count; offset += usual_block_) {
        const std::size_t here = std::size_t(std::min<std::uint64_t>(usual_block_, chosen.count - offset));
        for (std::size_t i = 0; i < usual_block_; ++i) trials[i] = chosen[offset + std::min(i, here - 1)];
        source_->draw(trials.data(), usual_block_, values.data());
        for (std::size_t p = 0; p < parameters(); ++p)
            std::copy_n(values.data() + p * usual_block_, here, to.parameters + p * to.stride + offset);
    }
}

std::uint64_t campaign::run(const trial_choice& chosen, const result_columns& to, const run_options& options) const {
    check(chosen);
    const std::uint64_t count = chosen.count;
    if (count == 0) return 0;
    const int threads = threads_for(options);
    const bool one_by_one = study_.loop.integrator == integrator_kind::reference; // its steps follow one trial
    const std::size_t block_size = one_by_one ? lanes : block_size_for(options, count, threads, usual_block_);
    const std::size_t trials_per_block = one_by_one ? 1 : block_size;
    const std::uint64_t blocks = (count + trials_per_block - 1) / trials_per_block;
    work_queue queue(blocks);

    const auto work = [&](int) {
        queue.guard([&] {
            block_runner runner(study_, *source_, block_size);
            std::uint64_t block = 0;
            while (queue.take(block)) {
                const std::uint64_t offset = block * trials_per_block;
                const std::size_t trials = std::size_t(std::min<std::uint64_t>(trials_per_block, count - offset));
                if (runner.run(chosen, offset, trials, to, [&] { return queue.keep_going(); }))
                    queue.finish(block, trials);
            }
        });
    };
    // The arena bounds the threads of this run; the global limit lets it have more than the machine has cores. A thread
    // without a block would do nothing. The thread that enters the arena works too: in a forked process it is the only
    // one, since oneTBB's own are gone.
    const int workers = int(std::min<std::uint64_t>(std::uint64_t(threads), blocks));
    const auto all_work = [&] {
        const oneapi::tbb::global_control limit(oneapi::tbb::global_control::max_allowed_parallelism,
                                                std::size_t(workers));
        oneapi::tbb::task_arena arena(workers);
        arena.execute([&] { oneapi::tbb::parallel_for(0, workers, work, oneapi::tbb::simple_partitioner()); });
    };
    const auto ask = [&] {
        queue.guard([&] {
            if (options.progress && !options.progress(queue.done())) queue.cancel();
        });
    };
    watch([&] { queue.guard(all_work); }, ask);
    if (queue.keep_going()) ask(); // the last word: all is done
    queue.rethrow();
    return std::min(count, queue.finished_prefix() * trials_per_block);
}

recording campaign::replay(std::uint64_t trial, const std::function<bool()>& keep_going) const {
    if (trial >= trials_available()) throw std::invalid_argument("replay: the study has no trial of this index");
    recording result;
    work_queue queue(1);
    const auto work = [&] {
        result = block_runner(study_, *source_, lanes).replay(trial, signals_, [&] { return queue.keep_going(); });
    };
    const auto ask = [&] {
        queue.guard([&] {
            if (!keep_going()) queue.cancel();
        });
    };
    watch([&] { queue.guard(work); }, ask);
    queue.rethrow();
    return result;
}

} // namespace windage
