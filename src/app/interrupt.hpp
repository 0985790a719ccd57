#pragma once

#include <atomic>

namespace aureole::app {

/// Lets SIGINT and SIGTERM set the flag instead of ending the process, so that a run can clean up. The flag
/// is the one piece of process-wide state, as signals are.
void catch_interrupts();
const std::atomic<bool>* interrupt_flag();

} // namespace aureole::app
