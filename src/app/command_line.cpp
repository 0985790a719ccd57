#include "aureole/app/command_line.hpp"

#include "interrupt.hpp"
#include "terminal.hpp"
#include "wrapped.hpp"

#include "aureole/app/heights.hpp"
#include "aureole/app/inspect.hpp"
#include "aureole/app/laws.hpp"
#include "aureole/app/predict.hpp"
#include "aureole/app/spectra_command.hpp"
#include "aureole/base/error.hpp"
#include "aureole/scenario/scenario.hpp"
#include "aureole/scenario/starter.hpp"
#include "aureole/version.hpp"

#include <CLI/CLI.hpp>
#include <fmt/format.h>

#include <cstdio>
#include <exception>
#include <iostream>
#include <new>
#include <thread>

namespace aureole::app {

namespace {

struct Common {
    bool quiet = false;
    int verbosity = 0;
    int threads = 0;
    bool reproducible = false;
    std::string colour = "auto";
    std::string memory;
};

struct Arguments {
    Common common;
    std::string scenario_file, folder, name, file;
    std::vector<std::string> overrides;
    bool force = false, dry_run = false;
    HeightsArguments heights;
};

void add_common(CLI::App& app, Common& common) {
    app.add_flag("-q,--quiet", common.quiet, "Print errors only");
    app.add_flag("-v,--verbose", common.verbosity, "Say more");
    app.add_option("--color", common.colour, "Colour messages")
        ->check(CLI::IsMember({"auto", "always", "never"}))
        ->capture_default_str();
}

void add_compute(CLI::App& app, Common& common, bool limits_memory = true) {
    app.add_option("--threads", common.threads, "Threads to use; 0: all processors")
        ->check(CLI::Range(0, 4096));
    if (limits_memory) {
        app.add_option("--memory", common.memory, "Most working memory, such as \"2 GB\"");
    }
    app.add_flag("--reproducible", common.reproducible, "Same bits on every x86-64 processor (slower)");
}

std::string as_typed(int argc, char** argv) {
    std::string command = "aureole";
    for (int i = 1; i < argc; ++i) {
        command += ' ';
        command += argv[i];
    }
    return command;
}

/// "2 GB", "500 MiB", "800000000" -> bytes. Throws Error(usage).
std::size_t bytes_of(const std::string& text) {
    if (text.empty()) {
        return 0;
    }
    std::size_t used = 0;
    double number = 0;
    try {
        number = std::stod(text, &used);
    } catch (const std::exception&) {
        used = 0;
    }
    const std::string unit = CLI::detail::trim_copy(text.substr(used));
    const std::pair<const char*, double> units[] = {{"", 1},        {"B", 1},          {"kB", 1e3},
                                                    {"MB", 1e6},    {"GB", 1e9},       {"TB", 1e12},
                                                    {"KiB", 1024.}, {"MiB", 1048576.}, {"GiB", 1073741824.}};
    for (const auto& [name, size] : units) {
        if (used > 0 && unit == name && number > 0 && number * size < 1e18) {
            return static_cast<std::size_t>(number * size);
        }
    }
    throw Error(ErrorKind::usage,
                fmt::format("--memory: found \"{}\", expected a size such as \"2 GB\"", text));
}

RunContext context_of(const Common& common) {
    RunContext context;
    context.threads = common.threads > 0
                          ? common.threads
                          : static_cast<int>(std::max(1U, std::thread::hardware_concurrency()));
    context.reproducible = common.reproducible;
    context.memory_limit = bytes_of(common.memory);
    context.interrupt = interrupt_flag();
    return context;
}

void print_lines(const std::vector<std::string>& lines) {
    for (const std::string& line : lines) {
        fmt::print("{}\n", line);
    }
    std::fflush(stdout);
}

int run_predict(const Arguments& arguments, const std::string& command, const RunContext& context) {
    const auto scenario = scenario::load(arguments.scenario_file, arguments.overrides);
    if (arguments.dry_run) {
        print_lines(plan(scenario, context).lines());
        return 0;
    }
    if (arguments.folder.empty()) {
        throw Error(ErrorKind::usage, "predict: expected -o DIR, the folder for the results");
    }
    const auto result = predict(scenario, {arguments.folder, arguments.force, command}, context);
    if (!arguments.common.quiet) {
        print_lines(result.summary);
    }
    for (const std::string& warning : result.warnings) {
        context.say(LogLevel::warning, warning);
    }
    return result.accuracy_missed ? static_cast<int>(ErrorKind::accuracy) : 0;
}

int run_spectra(const Arguments& arguments, const std::string& command, const RunContext& context) {
    const auto scenario = scenario::load(arguments.scenario_file, arguments.overrides);
    const auto result =
        write_spectra(scenario, {arguments.file, arguments.name, arguments.force, command}, context);
    if (!arguments.common.quiet) {
        print_lines(result.summary);
    }
    for (const std::string& warning : result.warnings) {
        context.say(LogLevel::warning, warning);
    }
    return 0;
}

int run_scenario(const Arguments& arguments) {
    if (arguments.name.empty()) {
        for (const auto& starter : scenario::starters()) {
            fmt::print("{:<16} {}\n", starter.name, starter.line);
        }
        return 0;
    }
    for (const auto& starter : scenario::starters()) {
        if (starter.name == arguments.name) {
            fmt::print("{}", starter.text);
            return 0;
        }
    }
    std::string known;
    for (const auto& starter : scenario::starters()) {
        known += known.empty() ? "" : ", ";
        known += starter.name;
    }
    throw Error(ErrorKind::usage,
                fmt::format("scenario: found \"{}\", expected one of {}", arguments.name, known));
}

} // namespace

int run(int argc, char** argv) {
    Arguments arguments;
    CLI::App app{"What a cosmic-ray halo looks like through a telescope: from spectra on a grid to radio and "
                 "gamma-ray maps and scale heights.",
                 "aureole"};
    app.set_version_flag("--version", std::string("aureole ") + version);
    app.require_subcommand(1);
    constexpr std::size_t help_column = 30;
    app.get_formatter()->column_width(help_column);
    app.footer("See 'aureole VERB --help', and aureole(1).");

    auto* predict_verb =
        app.add_subcommand("predict", "From a scenario to maps, profiles, scale heights and a summary");
    predict_verb->add_option("SCENARIO", arguments.scenario_file, "Scenario file (TOML)")->required();
    predict_verb->add_option("-o,--output", arguments.folder, "Folder for the results");
    predict_verb
        ->add_option("--set", arguments.overrides, "Override a scenario key: KEY=VALUE, any number of times")
        ->allow_extra_args(false);
    predict_verb->add_flag("--force", arguments.force, "Replace the results of an earlier run in the folder");
    predict_verb->add_flag("--dry-run", arguments.dry_run,
                           "Check the scenario and its files; print sizes, memory and cost");
    add_compute(*predict_verb, arguments.common);
    add_common(*predict_verb, arguments.common);

    auto* spectra_verb = app.add_subcommand(
        "spectra", "Solve for the spectra under one scattering law and write them as a grid file");
    spectra_verb->add_option("SCENARIO", arguments.scenario_file, "Scenario file (TOML)")->required();
    spectra_verb->add_option("-o,--output", arguments.file, "Grid file to write (FITS)")->required();
    spectra_verb->add_option("--law", arguments.name, "Name of the law; needed where there are several");
    spectra_verb
        ->add_option("--set", arguments.overrides, "Override a scenario key: KEY=VALUE, any number of times")
        ->allow_extra_args(false);
    spectra_verb->add_flag("--force", arguments.force, "Replace the file if it is there");
    add_compute(*spectra_verb, arguments.common, false);
    add_common(*spectra_verb, arguments.common);

    auto* scenario_verb =
        app.add_subcommand("scenario", "Print a complete starter scenario, or the list of them");
    scenario_verb->add_option("NAME", arguments.name, "Name of a starter scenario");

    auto* laws_verb = app.add_subcommand("laws", "Print the list of scattering laws, or all about one");
    laws_verb->add_option("NAME", arguments.name, "Name of a law of the list");

    auto* inspect_verb =
        app.add_subcommand("inspect", "What a grid file, scenario or map holds, and every problem in it");
    inspect_verb->add_option("FILE", arguments.file, "File to look at")->required();
    add_common(*inspect_verb, arguments.common);

    auto* heights_verb = app.add_subcommand("heights", "Vertical profiles and scale heights from FITS maps");
    add_heights_options(*heights_verb, arguments.heights);
    add_compute(*heights_verb, arguments.common);
    add_common(*heights_verb, arguments.common);

    try {
        app.parse(argc, argv);
    } catch (const CLI::CallForHelp&) {
        fmt::print("{}", wrapped(app.help(), help_column));
        return 0;
    } catch (const CLI::ParseError& error) {
        return app.exit(error) == 0 ? 0 : static_cast<int>(ErrorKind::usage);
    }

    const Colour colour = arguments.common.colour == "always"  ? Colour::always
                          : arguments.common.colour == "never" ? Colour::never
                                                               : Colour::automatic;
    Terminal terminal({arguments.common.quiet, arguments.common.verbosity, colour});
    try {
        catch_interrupts();
        RunContext context = context_of(arguments.common);
        terminal.attach(context);
        const std::string command = as_typed(argc, argv);
        int code = 0;
        if (predict_verb->parsed()) {
            code = run_predict(arguments, command, context);
        } else if (spectra_verb->parsed()) {
            code = run_spectra(arguments, command, context);
        } else if (scenario_verb->parsed()) {
            code = run_scenario(arguments);
        } else if (laws_verb->parsed()) {
            code = laws(arguments.name);
        } else if (inspect_verb->parsed()) {
            code = inspect(arguments.file, arguments.common.quiet, context);
        } else {
            arguments.heights.command = command;
            arguments.heights.quiet = arguments.common.quiet;
            code = heights(arguments.heights, context);
        }
        if (std::fflush(stdout) != 0) {
            throw Error(ErrorKind::output, "standard output cannot be written");
        }
        return code;
    } catch (const Error& error) {
        terminal.error(error.what());
        return static_cast<int>(error.kind());
    } catch (const std::bad_alloc&) {
        terminal.error("out of memory; 'aureole predict --dry-run' tells what a run needs");
        return static_cast<int>(ErrorKind::runtime);
    } catch (const std::exception& error) {
        terminal.error(
            fmt::format("{} (this is a fault of aureole, not of your input)", error.what()).c_str());
        return static_cast<int>(ErrorKind::runtime);
    }
}

} // namespace aureole::app
