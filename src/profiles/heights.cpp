#include "aureole/profiles/heights.hpp"

#include "refit.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/parallel.hpp"
#include "aureole/base/progress.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <map>
#include <tuple>

namespace aureole::profiles {

namespace {

constexpr double nothing = std::numeric_limits<double>::quiet_NaN();

bool alike(double a, double b, double scale) {
    return std::abs(a - b) <= 1e-6 * scale;
}

bool same_pixels(const maps::PixelGrid& a, const maps::PixelGrid& b) {
    const double step = std::min(std::abs(a.step_x), std::abs(a.step_y));
    return a.nx == b.nx && a.ny == b.ny && alike(a.step_x, b.step_x, step) &&
           alike(a.step_y, b.step_y, step) && alike(a.centre_x, b.centre_x, 1000) &&
           alike(a.centre_y, b.centre_y, 1000) && std::abs(a.lon - b.lon) <= 1e-3 * step &&
           std::abs(a.lat - b.lat) <= 1e-3 * step && alike(a.rotation, b.rotation, 1) &&
           a.projection == b.projection && a.frame == b.frame;
}

bool same_beam(const std::optional<maps::Beam>& a, const std::optional<maps::Beam>& b) {
    if (!a || !b) {
        return a.has_value() == b.has_value();
    }
    const bool round = alike(a->major, a->minor, a->major);
    const double turned = std::remainder(a->position_angle - b->position_angle, constants::pi);
    return alike(a->major, b->major, a->major) && alike(a->minor, b->minor, a->major) &&
           (round || std::abs(turned) <= 1e-6);
}

std::string describe(const std::optional<maps::Beam>& beam) {
    if (!beam) {
        return "no beam";
    }
    return fmt::format("{:.6g} x {:.6g} arcsec at {:.6g} deg", beam->major / constants::arcsecond,
                       beam->minor / constants::arcsecond, beam->position_angle / constants::degree);
}

void check_alike(std::span<const maps::Image> images) {
    if (images.empty()) {
        throw Error(ErrorKind::input, "no map to measure heights in");
    }
    const maps::Image& first = images.front();
    for (const maps::Image& image : images) {
        if (!same_pixels(first.pixels, image.pixels)) {
            throw Error(
                ErrorKind::input,
                fmt::format("{}: found other pixels than in {} ({} x {} against {} x {}, or another place), "
                            "expected all maps on one pixel grid",
                            image.name, first.name, image.pixels.nx, image.pixels.ny, first.pixels.nx,
                            first.pixels.ny));
        }
        if (!same_beam(first.beam, image.beam)) {
            throw Error(
                ErrorKind::input,
                fmt::format("{}: found beam {}, expected {} as in {}: bring all maps to one beam first",
                            image.name, describe(image.beam), describe(first.beam), first.name));
        }
        if (image.unit != first.unit) {
            throw Error(ErrorKind::input, fmt::format("{}: found unit '{}', expected '{}' as in {}",
                                                      image.name, image.unit, first.unit, first.name));
        }
    }
}

void check_spec(const HeightsSpec& spec, std::size_t images) {
    check(spec.profile);
    if (!spec.rms.empty() && spec.rms.size() != images) {
        throw Error(ErrorKind::scenario,
                    fmt::format("heights: found {} values of the noise for {} maps, expected one for each",
                                spec.rms.size(), images));
    }
    if (spec.models.empty()) {
        throw Error(ErrorKind::scenario, "heights: no model to fit");
    }
    if (!(spec.least_height >= 0) || !(spec.greatest_height > spec.least_height)) {
        throw Error(ErrorKind::scenario,
                    fmt::format("heights: found a range from {} to {} cm, expected 0 <= least < greatest",
                                spec.least_height, spec.greatest_height));
    }
}

double tilt_of(const ProfileSpec& spec) {
    return std::min(spec.inclination, constants::pi - spec.inclination);
}

/// One fit to do: row of the report.
struct Task {
    std::size_t profile = 0;
    Model model = Model::exponential;
    Side side = Side::both;
    bool forward = false;
};

std::vector<Task> tasks_of(const HeightsReport& report, const HeightsSpec& spec) {
    const std::vector<Side> sides = spec.sides == Sides::each ? std::vector<Side>{Side::above, Side::below}
                                                              : std::vector<Side>{Side::both};
    std::vector<Task> tasks;
    for (std::size_t p = 0; p < report.profiles.size(); ++p) {
        for (const Side side : sides) {
            for (const Model model : spec.models) {
                tasks.push_back({p, model, side, false});
                if (spec.disc) {
                    tasks.push_back({p, model, side, true});
                }
            }
        }
    }
    return tasks;
}

/// The smallest length a profile shows.
double finest(const Profile& profile) {
    double bin = std::numeric_limits<double>::infinity();
    for (std::size_t b = 0; b < profile.high.size(); ++b) {
        bin = std::min(bin, profile.high[b] - profile.low[b]);
    }
    return std::max(profile.beam_y, 0.3 * bin);
}

bool same_kernel(const Profile& a, const Profile& b) {
    return a.x_low == b.x_low && a.x_high == b.x_high && a.beam_x == b.beam_x &&
           a.height.empty() == b.height.empty() && finest(a) == finest(b);
}

std::vector<std::optional<DiscKernel>>
kernels_of(std::span<const maps::Image> images, const HeightsSpec& spec, HeightsReport& report) {
    std::vector<std::optional<DiscKernel>> kernels(report.profiles.size());
    if (!spec.disc) {
        return kernels;
    }
    std::optional<double> length = spec.disc->scale_length;
    if (!length) {
        report.scale_length = fit_scale_length(images.front(), spec.profile, spec.disc->edge_radius);
        if (!report.scale_length->problem.empty()) {
            report.notes.push_back("No inclined disc was fitted: " + report.scale_length->problem + ".");
            return kernels;
        }
        length = report.scale_length->length;
    }
    for (std::size_t p = 0; p < kernels.size(); ++p) {
        const Profile& profile = report.profiles[p];
        const auto alike =
            std::find_if(report.profiles.begin(), report.profiles.begin() + static_cast<std::ptrdiff_t>(p),
                         [&](const Profile& other) { return same_kernel(profile, other); });
        if (alike != report.profiles.begin() + static_cast<std::ptrdiff_t>(p)) {
            kernels[p] = kernels[static_cast<std::size_t>(alike - report.profiles.begin())];
        } else if (!profile.height.empty()) {
            kernels[p] = disc_kernel(spec.profile.inclination, *length, spec.disc->edge_radius, profile.x_low,
                                     profile.x_high, profile.beam_x, finest(profile));
        }
    }
    return kernels;
}

HeightResult without_fit(const Profile& profile, const Task& task, Status status, std::string problem) {
    Profile empty;
    FitSpec spec;
    spec.side = task.side;
    HeightResult result = fit_height(empty, task.model, spec);
    result.forward = task.forward;
    result.status = status;
    result.problem = std::move(problem);
    result.curve.assign(profile.height.size(), nothing);
    return result;
}

HeightResult run(const Task& task,
                 const Profile& profile,
                 const std::optional<DiscKernel>& kernel,
                 const HeightsSpec& spec,
                 CurveCache& cache,
                 const HeightResult* start) {
    if (task.forward && !kernel) {
        return without_fit(profile, task, Status::not_converged, "no scale length for the inclined disc");
    }
    if (!task.forward && tilt_of(spec.profile) < 75 * constants::degree && !spec.force_inclination) {
        return without_fit(profile, task, Status::too_inclined,
                           "the edge-on model is refused below 75 deg inclination; fit the inclined disc");
    }
    FitSpec fit;
    fit.least_height = spec.least_height;
    fit.greatest_height = spec.greatest_height;
    fit.side = task.side;
    fit.fit_centre = spec.fit_centre;
    fit.fit_background = spec.profile.background == BackgroundFrom::fitted;
    fit.calibration_error = spec.profile.calibration_error;
    fit.distance_fraction = spec.profile.distance_error / spec.profile.distance;
    if (task.forward) {
        fit.disc = kernel;
    }
    return fit_height(profile, task.model, fit, cache, start);
}

/// Tasks that see the same bins through the same kernel, map by map: they share their curves. Long groups are
/// cut, so that several threads have work; the cut does not depend on their number.
std::vector<std::vector<std::size_t>> groups_of(const std::vector<Task>& tasks, const HeightsReport& report) {
    std::map<std::tuple<int, Side, bool>, std::vector<std::size_t>> groups;
    for (std::size_t k = 0; k < tasks.size(); ++k) {
        groups[{report.profiles[tasks[k].profile].strip, tasks[k].side, tasks[k].forward}].push_back(k);
    }
    std::vector<std::vector<std::size_t>> made;
    constexpr std::size_t longest = 16;
    for (const auto& [key, group] : groups) {
        const std::size_t parts = (group.size() + longest - 1) / longest;
        for (std::size_t part = 0; part < parts; ++part) {
            made.emplace_back(group.begin() + static_cast<std::ptrdiff_t>(group.size() * part / parts),
                              group.begin() + static_cast<std::ptrdiff_t>(group.size() * (part + 1) / parts));
        }
    }
    return made;
}

/// The row of an earlier report that has the place and the model of the task; null without one.
const HeightResult* counterpart(const HeightsReport* start, std::size_t k, const HeightRow& row) {
    if (start == nullptr || k >= start->rows.size()) {
        return nullptr;
    }
    const HeightRow& earlier = start->rows[k];
    const bool same = earlier.image == row.image && earlier.strip == row.strip &&
                      earlier.fit.model == row.fit.model && earlier.fit.side == row.fit.side &&
                      earlier.fit.forward == row.fit.forward;
    return same ? &earlier.fit : nullptr;
}

std::vector<HeightRow> fit_all(const HeightsReport& report,
                               const std::vector<std::optional<DiscKernel>>& kernels,
                               const HeightsSpec& spec,
                               const RunContext& context,
                               const HeightsReport* start) {
    const auto tasks = tasks_of(report, spec);
    const auto groups = groups_of(tasks, report);
    std::vector<HeightRow> rows(tasks.size());
    for_each_block(context, groups.size(), [&](std::size_t g) {
        CurveCache cache;
        for (const std::size_t k : groups[g]) {
            const Task& task = tasks[k];
            const Profile& profile = report.profiles[task.profile];
            HeightRow& row = rows[k];
            row.image = profile.image;
            row.strip = profile.strip;
            row.profile = task.profile;
            row.fit.model = task.model;
            row.fit.side = task.side;
            row.fit.forward = task.forward;
            row.fit = run(task, profile, kernels[task.profile], spec, cache, counterpart(start, k, row));
        }
    });
    return rows;
}

/// Whether the areas and unit covariances of one map serve another.
bool same_plan(const maps::Image& a, const maps::Image& b, const ProfileSpec& spec) {
    const auto blank = [](float x, float y) { return std::isfinite(x) == std::isfinite(y); };
    return spec.noise != NoiseFrom::autocorrelation &&
           std::equal(a.value.begin(), a.value.end(), b.value.begin(), b.value.end(), blank);
}

std::vector<Profile>
measure_profiles(std::span<const maps::Image> images, const HeightsSpec& spec, const RunContext& context) {
    std::vector<ProfileSpec> specs(images.size(), spec.profile);
    std::vector<Plan> plans;
    std::vector<std::size_t> plan_of(images.size(), 0);
    bool without_noise = false;
    for (std::size_t image = 0, planned = 0; image < images.size(); ++image) {
        context.check_interrupt();
        if (!spec.rms.empty()) {
            specs[image].rms = spec.rms[image];
        }
        const bool noiseless = specs[image].rms && *specs[image].rms == 0;
        if (plans.empty() || without_noise != noiseless ||
            !same_plan(images[planned], images[image], specs[image])) {
            plans.push_back(plan(images[image], specs[image]));
            planned = image;
            without_noise = noiseless;
        }
        plan_of[image] = plans.size() - 1;
    }
    std::vector<std::vector<Profile>> measured(images.size());
    Progress progress(context, "profiles", images.size());
    for_each_block(context, images.size(), [&](std::size_t image) {
        measured[image] = measure(images[image], specs[image], plans[plan_of[image]]);
        progress.step();
    });
    std::vector<Profile> profiles;
    for (std::size_t image = 0; image < images.size(); ++image) {
        for (Profile& profile : measured[image]) {
            profile.image = image;
            profiles.push_back(std::move(profile));
        }
    }
    return profiles;
}

std::vector<ModelScore> scores_of(const HeightsReport& report, const HeightsSpec& spec) {
    std::vector<ModelScore> scores;
    for (const Model model : spec.models) {
        for (const bool forward : {false, true}) {
            if (forward && !spec.disc) {
                continue;
            }
            ModelScore score{model, forward, 0, 0, false};
            for (const HeightRow& row : report.rows) {
                if (row.strip == -1 && row.fit.model == model && row.fit.forward == forward) {
                    score.parameters = row.fit.parameters;
                    score.aicc +=
                        usable(row.fit.status) ? row.fit.aicc : std::numeric_limits<double>::infinity();
                }
            }
            scores.push_back(score);
        }
    }
    return scores;
}

/// Only the inclined disc competes where it was asked for: the edge-on rows stand beside it for comparison.
std::optional<std::size_t> choose_asked(const std::vector<ModelScore>& scores, const HeightsSpec& spec) {
    std::vector<ModelScore> asked = scores;
    for (ModelScore& score : asked) {
        if (score.forward != spec.disc.has_value()) {
            score.aicc = std::numeric_limits<double>::infinity();
        }
    }
    return choose(asked);
}

template <class Action> void for_each_kind(const HeightsSpec& spec, Action&& action) {
    for (const Model model : spec.models) {
        for (const bool forward : {false, true}) {
            for (const Side side : {Side::both, Side::above, Side::below}) {
                if ((forward && !spec.disc) || (side == Side::both) != (spec.sides == Sides::together)) {
                    continue;
                }
                for (std::size_t component = 0; component < components(model); ++component) {
                    action(model, forward, side, component);
                }
            }
        }
    }
}

void add_combined(HeightsReport& report, std::size_t images, const HeightsSpec& spec) {
    for (std::size_t image = 0; image < images; ++image) {
        for_each_kind(spec, [&](Model model, bool forward, Side side, std::size_t component) {
            std::vector<const HeightResult*> fits;
            std::vector<double> fluxes;
            for (const HeightRow& row : report.rows) {
                const bool strip = row.strip >= 0 || spec.profile.strips == 1;
                if (row.image == image && strip && row.fit.model == model && row.fit.forward == forward &&
                    row.fit.side == side) {
                    fits.push_back(&row.fit);
                    fluxes.push_back(report.profiles[row.profile].flux);
                }
            }
            CombinedHeight mean = combine(fits, fluxes, component);
            mean.image = image;
            mean.model = model;
            mean.forward = forward;
            mean.side = side;
            mean.error_distance = mean.h * spec.profile.distance_error / spec.profile.distance;
            report.combined.push_back(mean);
        });
    }
}

/// Heights of one kind in all maps.
struct Series {
    std::vector<double> frequency, h, error;
};

void add_exponent(HeightsReport& report,
                  const Series& series,
                  HeightExponent label,
                  const HeightsSpec& spec) {
    HeightExponent exponent = fit_exponent(series.frequency, series.h, series.error);
    exponent.model = label.model;
    exponent.forward = label.forward;
    exponent.side = label.side;
    exponent.component = label.component;
    exponent.strip = label.strip;
    exponent.h0_error_distance = exponent.h0 * spec.profile.distance_error / spec.profile.distance;
    report.exponents.push_back(exponent);
}

void add_exponents(HeightsReport& report, std::span<const maps::Image> images, const HeightsSpec& spec) {
    if (!report.chosen || images.size() < 2) {
        return;
    }
    const ModelScore& chosen = report.scores[*report.chosen];
    for_each_kind(spec, [&](Model model, bool forward, Side side, std::size_t component) {
        if (model != chosen.model || forward != chosen.forward) {
            return;
        }
        HeightExponent label;
        label.model = model;
        label.forward = forward;
        label.side = side;
        label.component = component;
        Series whole;
        Series mean;
        for (const HeightRow& row : report.rows) {
            if (row.strip == -1 && row.fit.model == model && row.fit.forward == forward &&
                row.fit.side == side && usable(row.fit.status) && !row.fit.component[component].upper_limit) {
                whole.frequency.push_back(images[row.image].frequency);
                whole.h.push_back(row.fit.component[component].h);
                whole.error.push_back(row.fit.component[component].h_err_scatter);
            }
        }
        add_exponent(report, whole, label, spec);
        if (spec.profile.strips < 2) {
            return;
        }
        for (const CombinedHeight& row : report.combined) {
            if (row.model == model && row.forward == forward && row.side == side &&
                row.component == component && row.strips > 0) {
                mean.frequency.push_back(images[row.image].frequency);
                mean.h.push_back(row.h);
                mean.error.push_back(row.error_scatter);
            }
        }
        label.strip = -2;
        add_exponent(report, mean, label, spec);
    });
}

void add_notes(HeightsReport& report, const HeightsSpec& spec) {
    const double tilt = tilt_of(spec.profile) / constants::degree;
    if (tilt < 75 && !spec.force_inclination) {
        report.notes.push_back("Edge-on models were not fitted: the inclination is below 75 deg.");
    } else if (tilt <= 85) {
        report.notes.push_back(fmt::format("Edge-on models are biased at an inclination of {:.1f} deg: a "
                                           "naive fit of a disc with hR = 4 h errs by 73, "
                                           "40 and 11 % at 75, 80 and 85 deg.",
                                           tilt));
    }
    const bool noiseless =
        std::any_of(report.profiles.begin(), report.profiles.end(),
                    [](const Profile& profile) { return profile.errors == ErrorSource::noiseless; });
    if (noiseless) {
        report.notes.push_back(
            "Noiseless map: every bin has the weight of 1e-3 of the profile's peak, and errors of "
            "heights come from the residuals of the fit.");
    }
    report.notes.push_back("AICc counts independent bins, (tr R)^2/tr R^2 of their correlation matrix R.");
    if (!report.chosen) {
        report.notes.push_back("No model could be fitted to all maps.");
    }
}

} // namespace

HeightsReport measure_heights(std::span<const maps::Image> images,
                              const HeightsSpec& spec,
                              const RunContext& context,
                              const HeightsReport* start) {
    check_spec(spec, images.size());
    check_alike(images);
    HeightsReport report;
    report.profiles = measure_profiles(images, spec, context);
    const auto kernels = kernels_of(images, spec, report);
    report.rows = fit_all(report, kernels, spec, context, start);
    report.scores = scores_of(report, spec);
    report.chosen = choose_asked(report.scores, spec);
    if (report.chosen) {
        ModelScore& chosen = report.scores[*report.chosen];
        chosen.chosen = true;
        for (HeightRow& row : report.rows) {
            row.chosen = row.fit.model == chosen.model && row.fit.forward == chosen.forward;
        }
    }
    add_combined(report, images.size(), spec);
    add_exponents(report, images, spec);
    add_notes(report, spec);
    return report;
}

} // namespace aureole::profiles
