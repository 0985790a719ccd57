#include "interrupt.hpp"

#include <csignal>

namespace aureole::app {

namespace {

std::atomic<bool> interrupted{false};

extern "C" void on_interrupt(int) {
    interrupted = true;
}

} // namespace

void catch_interrupts() {
    std::signal(SIGINT, on_interrupt);
    std::signal(SIGTERM, on_interrupt);
}

const std::atomic<bool>* interrupt_flag() {
    return &interrupted;
}

} // namespace aureole::app
