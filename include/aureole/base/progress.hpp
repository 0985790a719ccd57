#pragma once

#include "aureole/base/run_context.hpp"

#include <cstddef>
#include <mutex>
#include <string>

namespace aureole {

/// Counts finished steps of a stage from any thread and reports them, one thread at a time.
class Progress {
  public:
    Progress(const RunContext& context, std::string stage, std::size_t steps)
        : context_(context), stage_(std::move(stage)), steps_(steps) {}

    void step() {
        const std::lock_guard lock(mutex_);
        ++done_;
        context_.report(stage_, static_cast<double>(done_) / static_cast<double>(steps_));
    }

  private:
    const RunContext& context_;
    std::string stage_;
    std::size_t steps_;
    std::size_t done_ = 0;
    std::mutex mutex_;
};

} // namespace aureole
