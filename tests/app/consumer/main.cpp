#include <atomic>
#include <aureole/app/predict.hpp>
#include <aureole/scenario/starter.hpp>
#include <aureole/version.hpp>
#include <cstdio>
#include <exception>
#include <string>
#include <thread>
#include <vector>

// Predicts two scenarios one after the other and then at the same time, into folders below the one given.
int main(int, char** argv) {
    const std::string folder = argv[1];
    const std::vector<std::string> small{
        "grid.cells_r=8",  "grid.cells_z=8",          "map.pixel=20 arcsec", "heights.strips=1",
        "heights.rms=",    "heights.models=gaussian", "heights.from=0 kpc",  "radio.beam_major=40 arcsec",
        "heights.to=0 kpc"};
    std::atomic<bool> failed{false};
    const auto run = [&](std::size_t starter, const std::string& name) {
        try {
            const auto& start = aureole::scenario::starters()[starter];
            const auto scenario =
                aureole::scenario::parse(start.text, std::string(start.name) + ".toml", small);
            aureole::RunContext context;
            context.threads = 2;
            aureole::app::predict(scenario, {folder + name, false, "consumer"}, context);
        } catch (const std::exception& error) {
            std::fprintf(stderr, "%s: %s\n", name.c_str(), error.what());
            failed = true;
        }
    };
    run(0, "/alone_0");
    run(1, "/alone_1");
    std::thread first(run, 0, "/together_0");
    std::thread second(run, 1, "/together_1");
    first.join();
    second.join();
    std::printf("aureole %s\n", aureole::version);
    return failed ? 1 : 0;
}
