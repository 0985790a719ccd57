#pragma once

#include "aureole/base/run_context.hpp"

#include <atomic>
#include <cstddef>
#include <exception>

namespace aureole {

/// Calls body(block) for every block in [0, blocks), on context.threads threads, in no fixed order. The first
/// exception is thrown again after all threads have stopped. Results must not depend on the order: write to
/// places of your own, and add partial sums by block index afterwards, so that the bits do not depend on the
/// thread count.
template <class Body> void for_each_block(const RunContext& context, std::size_t blocks, Body&& body) {
    std::exception_ptr failure = nullptr;
    std::atomic<bool> stop{false};
    const int threads = context.threads > 0 ? context.threads : 1;
#pragma omp parallel for schedule(dynamic, 1) num_threads(threads)
    for (std::size_t block = 0; block < blocks; ++block) {
        if (stop.load(std::memory_order_relaxed)) {
            continue;
        }
        try {
            context.check_interrupt();
            body(block);
        } catch (...) {
            stop = true;
#pragma omp critical(aureole_for_each_block)
            if (failure == nullptr) {
                failure = std::current_exception();
            }
        }
    }
    if (failure != nullptr) {
        std::rethrow_exception(failure);
    }
}

} // namespace aureole
