#include "terminal.hpp"

#include <fmt/format.h>
#include <spdlog/sinks/stdout_color_sinks.h>
#include <spdlog/spdlog.h>

#include <chrono>
#include <cstdio>
#include <cstdlib>
#include <mutex>
#include <string>
#include <unistd.h>

namespace aureole::app {

namespace {

using Clock = std::chrono::steady_clock;

bool wants_colour(Colour colour) {
    if (colour != Colour::automatic) {
        return colour == Colour::always;
    }
    const char* refused = std::getenv("NO_COLOR");
    const char* terminal = std::getenv("TERM");
    const bool dumb = terminal == nullptr || std::string_view(terminal) == "dumb";
    return isatty(STDERR_FILENO) != 0 && !dumb && (refused == nullptr || *refused == '\0');
}

std::string clock_text(double seconds) {
    const auto whole = static_cast<long>(seconds);
    return whole < 3600 ? fmt::format("{}:{:02}", whole / 60, whole % 60)
                        : fmt::format("{}:{:02}:{:02}", whole / 3600, whole / 60 % 60, whole % 60);
}

} // namespace

struct Terminal::State {
    std::shared_ptr<spdlog::logger> logger;
    bool draws_progress = false;
    std::mutex mutex;
    bool line_open = false;
    std::string stage;
    Clock::time_point stage_start, last_drawn;

    void clear() {
        if (line_open) {
            std::fputs("\r\x1b[K", stderr);
            std::fflush(stderr);
            line_open = false;
        }
    }
    void draw(std::string_view name, double fraction) {
        const std::lock_guard lock(mutex);
        const auto now = Clock::now();
        if (stage != name) {
            stage = name;
            stage_start = now;
        }
        if (fraction < 1 && now - last_drawn < std::chrono::milliseconds(100)) {
            return;
        }
        last_drawn = now;
        if (fraction >= 1) {
            clear();
            return;
        }
        const double elapsed = std::chrono::duration<double>(now - stage_start).count();
        if (elapsed < 0.3) {
            return;
        }
        const double left = fraction > 0 ? elapsed * (1 - fraction) / fraction : 0;
        std::fputs(fmt::format("\r\x1b[K{} {:3.0f} %  {} elapsed, {} left", name, 100 * fraction,
                               clock_text(elapsed), clock_text(left))
                       .c_str(),
                   stderr);
        std::fflush(stderr);
        line_open = true;
    }
};

Terminal::Terminal(const TerminalOptions& options) : state_(std::make_unique<State>()) {
    const auto sink = std::make_shared<spdlog::sinks::stderr_color_sink_mt>();
    sink->set_color_mode(wants_colour(options.colour) ? spdlog::color_mode::always
                                                      : spdlog::color_mode::never);
    state_->logger = std::make_shared<spdlog::logger>("aureole", sink);
    state_->logger->set_pattern("%^%l%$: %v");
    const auto level = options.quiet           ? spdlog::level::err
                       : options.verbosity > 0 ? spdlog::level::debug
                                               : spdlog::level::info;
    state_->logger->set_level(level);
    state_->draws_progress = !options.quiet && isatty(STDERR_FILENO) != 0;
}

Terminal::~Terminal() {
    clear_progress();
}

void Terminal::clear_progress() {
    const std::lock_guard lock(state_->mutex);
    state_->clear();
}

void Terminal::attach(RunContext& context) {
    context.log = [state = state_.get()](LogLevel level, std::string_view message) {
        {
            const std::lock_guard lock(state->mutex);
            state->clear();
        }
        const auto as = level == LogLevel::warning ? spdlog::level::warn
                        : level == LogLevel::debug ? spdlog::level::debug
                                                   : spdlog::level::info;
        state->logger->log(as, "{}", message);
    };
    if (state_->draws_progress) {
        context.progress = [state = state_.get()](std::string_view stage, double fraction) {
            state->draw(stage, fraction);
        };
    }
}

void Terminal::error(const char* message) {
    clear_progress();
    state_->logger->error("{}", message);
}

} // namespace aureole::app
