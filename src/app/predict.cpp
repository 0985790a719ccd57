#include "aureole/app/predict.hpp"

#include "law_shares.hpp"
#include "law_tables.hpp"
#include "predict_inputs.hpp"
#include "predict_tables.hpp"
#include "sky.hpp"

#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/base/progress.hpp"
#include "aureole/files/hash.hpp"
#include "aureole/files/json.hpp"
#include "aureole/files/run_folder.hpp"
#include "aureole/media/media.hpp"
#include "aureole/spectra/file_source.hpp"
#include "aureole/transport/solution_source.hpp"
#include "aureole/transport/solve.hpp"
#include "aureole/version.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <chrono>
#include <optional>

namespace aureole::app {

namespace {

using Clock = std::chrono::steady_clock;
using spectra::Source;
using spectra::Species;

void note_timing(const RunContext& context, const std::string& stage, Clock::time_point& since) {
    const auto now = Clock::now();
    context.say(LogLevel::debug,
                fmt::format("{}: {:.3f} s", stage, std::chrono::duration<double>(now - since).count()));
    since = now;
}

/// Spectra that the scenario states and those of a solution.
std::vector<Source>
with_solution(std::vector<Source> stated, const transport::Solution& solution, const grid::Grid& grid) {
    if (solution.electrons) {
        stated.push_back(transport::solution_source(solution, Species::electrons, grid));
    }
    if (solution.protons) {
        stated.push_back(transport::solution_source(solution, Species::protons, grid));
    }
    return stated;
}

/// What is solved again on cells twice as wide.
struct CoarseStage {
    grid::Grid grid;
    std::vector<Source> stated;
    transport::Problem problem;
};

/// Everything that the laws of a scenario share.
struct Stage {
    const scenario::Scenario& scenario;
    const Inputs& inputs;
    const media::Media& media;
    const std::vector<Source>& stated;
    const std::vector<ChannelGroup>& groups;
};

LawResult predict_law(const Stage& stage,
                      const transport::Problem& problem,
                      const std::optional<CoarseStage>& coarse,
                      const transport::NamedLaw& law,
                      const RunContext& context) {
    auto since = Clock::now();
    LawResult result;
    result.name = law.name;
    result.solution = transport::solve(problem, law, context);
    note_timing(context, law.name + ": transport", since);
    std::vector<Source> coarse_sources;
    if (coarse) {
        const auto solution = transport::solve(coarse->problem, law, context);
        result.coarse = solution.anchor;
        coarse_sources = with_solution(coarse->stated, solution, coarse->grid);
        note_timing(context, law.name + ": transport on coarser cells", since);
    }
    result.sky = make_sky(stage.scenario, stage.inputs, stage.media,
                          with_solution(stage.stated, result.solution, stage.inputs.grid),
                          coarse ? &coarse_sources : nullptr, stage.groups, context);
    note_shares(result.sky, law.name, result.solution, problem.spec.source_age, stage.inputs, stage.media,
                context);
    for (std::string& warning : law_warnings(result)) {
        result.sky.warnings.push_back(std::move(warning));
    }
    return result;
}

/// Law by law on all threads, or, where there are as many laws as threads, each law on a thread of its own.
std::vector<LawResult> predict_laws(const Stage& stage, const RunContext& context) {
    const auto spec = read_transport(stage.scenario, stage.inputs);
    const auto problem = transport::prepare_problem(spec, stage.inputs.grid, stage.media, context);
    std::vector<LawResult> results(spec.laws.size());
    std::optional<CoarseStage> coarse;
    if (stage.scenario.boolean("accuracy.estimate")) {
        const auto grid = grid::coarsened(stage.inputs.grid);
        const auto media = media::coarsened(stage.media, stage.inputs.grid, context);
        coarse = CoarseStage{grid, spectra::coarsened(stage.stated, stage.inputs.grid),
                             transport::prepare_problem(spec, grid, media, context)};
    }
    const bool side_by_side =
        context.threads > 1 && spec.laws.size() >= static_cast<std::size_t>(context.threads);
    RunContext inner = context;
    RunContext outer = context;
    (side_by_side ? inner : outer).threads = 1;
    if (side_by_side) {
        inner.progress = {}; // of several laws at once would be mixed up
    }
    Progress progress(context, "scattering laws", side_by_side ? spec.laws.size() : 0);
    for_each_block(outer, spec.laws.size(), [&](std::size_t law) {
        results[law] = predict_law(stage, problem, coarse, spec.laws[law], inner);
        if (side_by_side) {
            progress.step();
        }
    });
    return results;
}

std::string folder_of(const LawResult& law, bool alone) {
    return alone ? "" : law.name + "/";
}

/// Of a run of several laws; each has a summary of its own.
std::string laws_summary(const scenario::Scenario& scenario,
                         const std::vector<LawResult>& laws,
                         const std::string& hash,
                         const std::string& command) {
    files::Json::Array list;
    files::Json::Array warnings;
    for (const LawResult& law : laws) {
        list.push_back(files::Json::Object{{"law", law.name},
                                           {"folder", law.name},
                                           {"factor", law.solution.anchor.factor},
                                           {"over_empirical", law.solution.anchor.over_empirical}});
        warnings.insert(warnings.end(), law.sky.warnings.begin(), law.sky.warnings.end());
    }
    files::Json::Array leaves_out;
    for (const std::string& text : left_out(true)) {
        leaves_out.push_back(text);
    }
    const files::Json summary = files::Json::Object{{"aureole", version},
                                                    {"title", scenario.text("run.title")},
                                                    {"object", scenario.text("run.object")},
                                                    {"command", command},
                                                    {"scenario_hash", hash},
                                                    {"laws", std::move(list)},
                                                    {"warnings", std::move(warnings)},
                                                    {"leaves_out", std::move(leaves_out)}};
    return summary.text();
}

} // namespace

PredictResult
predict(const scenario::Scenario& scenario, const PredictOptions& options, const RunContext& context) {
    auto since = Clock::now();
    const Inputs inputs = read_inputs(scenario);
    const Plan sizes = plan(scenario, context);
    const auto groups = channel_groups(inputs, scenario, sizes.cells, sizes.room_for_emissivity);
    if (context.memory_limit > 0 && sizes.total_bytes > context.memory_limit) {
        throw Error(ErrorKind::runtime, fmt::format("--memory: the run needs about {:.2f} GB, found a limit "
                                                    "of {:.2f} GB; fewer cells, channels or "
                                                    "pixels need less",
                                                    static_cast<double>(sizes.total_bytes) / 1e9,
                                                    static_cast<double>(context.memory_limit) / 1e9));
    }
    files::RunFolder folder(options.folder, options.force);
    if (inputs.file) {
        folder.protect(inputs.file->path);
    }
    folder.protect(scenario.file());

    const auto* file = inputs.file ? &*inputs.file : nullptr;
    const auto media = media::load_media(scenario, inputs.grid, file, context);
    const auto stated = spectra::open_sources(scenario, inputs.grid, file, context);
    note_timing(context, "media and spectra", since);

    std::vector<LawResult> laws;
    const Stage stage{scenario, inputs, media, stated, groups};
    if (scenario.has_transport()) {
        laws = predict_laws(stage, context);
    } else {
        laws.push_back({"", {}, {}, make_sky(scenario, inputs, media, stated, nullptr, groups, context)});
    }
    since = Clock::now();

    const std::string effective = scenario::effective_toml(scenario);
    const std::string hash = files::hex(files::fnv1a(effective));
    const bool alone = laws.size() == 1;
    context.check_interrupt();
    PredictResult result;
    folder.begin_writing();
    folder.write_text("scenario.toml", effective);
    for (const LawResult& law : laws) {
        write_sky(law.sky, scenario, inputs, {hash, options.command, folder_of(law, alone), law.name}, folder,
                  context);
        result.warnings.insert(result.warnings.end(), law.sky.warnings.begin(), law.sky.warnings.end());
        result.accuracy_missed = result.accuracy_missed || law.sky.accuracy_missed || !has_converged(law);
    }
    if (scenario.has_transport()) {
        write_law_tables(laws, inputs.grid, media, hash, folder);
        if (!alone) {
            folder.write_text("summary.json", laws_summary(scenario, laws, hash, options.command));
        }
    }
    folder.finish(options.command, context);
    note_timing(context, "writing", since);
    result.files = folder.files();
    if (alone) {
        const Sky& sky = laws.front().sky;
        result.summary = summary_lines(scenario, inputs.settings, sky.fine.products, sky.fine.report,
                                       sky.heights, options.folder.string());
    }
    if (scenario.has_transport()) {
        if (alone) {
            result.summary.emplace_back("");
        } else {
            result.summary = title_lines(scenario, inputs.settings);
        }
        const auto lines = law_lines(laws);
        result.summary.insert(result.summary.end(), lines.begin(), lines.end());
        if (!alone) {
            result.summary.emplace_back("");
            result.summary.push_back(
                fmt::format("Maps and tables of each law are in {}, those of all laws in {}.",
                            (options.folder / "<law>").string(), (options.folder / "tables").string()));
            result.summary.emplace_back(leaves_out_line);
        }
    }
    return result;
}

} // namespace aureole::app
