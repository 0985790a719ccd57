#include "aureole/base/run_context.hpp"

#include "aureole/base/error.hpp"

namespace aureole {

void RunContext::check_interrupt() const {
    if (interrupt != nullptr && interrupt->load(std::memory_order_relaxed)) {
        throw Error(ErrorKind::interrupted, "interrupted");
    }
}

} // namespace aureole
