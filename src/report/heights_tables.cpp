#include "aureole/report/heights_tables.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <iterator>
#include <limits>

namespace aureole::report {

namespace {

using files::EcsvColumn;
using files::Json;
using profiles::CombinedHeight;
using profiles::Component;
using profiles::HeightExponent;
using profiles::HeightRow;
using profiles::HeightsReport;

constexpr double nothing = std::numeric_limits<double>::quiet_NaN();
constexpr double kpc = constants::kiloparsec;

const std::string& label_of(std::span<const std::string> labels, std::size_t image) {
    if (image >= labels.size()) {
        throw Error(ErrorKind::runtime,
                    fmt::format("tables of heights: found {} labels, expected one for map {}", labels.size(),
                                image + 1));
    }
    return labels[image];
}

/// Frequency and unit of a map, from its profiles.
const profiles::Profile* any_profile(const HeightsReport& report, std::size_t image) {
    const auto found = std::find_if(report.profiles.begin(), report.profiles.end(),
                                    [&](const profiles::Profile& profile) { return profile.image == image; });
    return found == report.profiles.end() ? nullptr : &*found;
}

/// One line of the table of heights, lengths in kpc.
struct Line {
    std::string map;
    double frequency = 0;
    long strip = -1;
    std::string model;
    bool forward = false;
    std::string side;
    long component = 0;
    bool chosen = false;
    double h = nothing, error_noise = nothing, error_scatter = nothing, error_distance = nothing;
    double error_numerical = nothing, amplitude = nothing, chi2 = nothing, dof = nothing, aicc = nothing;
    std::string status;
    double upper_limit = nothing;
    std::string unit;
};

Line line_of(const HeightRow& row,
             std::size_t index,
             const HeightsReport& report,
             std::span<const std::string> labels) {
    const Component& part = row.fit.component[index];
    const profiles::Profile& profile = report.profiles[row.profile];
    Line line;
    line.map = label_of(labels, row.image);
    line.frequency = profile.frequency;
    line.strip = row.strip;
    line.model = to_string(row.fit.model);
    line.forward = row.fit.forward;
    line.side = to_string(row.fit.side);
    line.component = static_cast<long>(index);
    line.chosen = row.chosen;
    line.status = to_string(row.fit.status);
    line.unit = profile.unit;
    if (usable(row.fit.status)) {
        line.h = part.h / kpc;
        line.error_noise = part.h_err_noise / kpc;
        line.error_scatter = part.h_err_scatter / kpc;
        line.error_distance = part.h_err_distance / kpc;
        line.amplitude = part.amplitude;
        line.chi2 = row.fit.chi2;
        line.dof = row.fit.dof;
        line.aicc = std::isfinite(row.fit.aicc) ? row.fit.aicc : nothing;
        line.error_numerical = part.numerical_error ? *part.numerical_error / kpc : nothing;
        line.upper_limit = part.upper_limit ? *part.upper_limit / kpc : nothing;
    }
    return line;
}

bool is_chosen(const HeightsReport& report, profiles::Model model, bool forward) {
    return report.chosen && report.scores[*report.chosen].model == model &&
           report.scores[*report.chosen].forward == forward;
}

Line line_of(const CombinedHeight& mean, const HeightsReport& report, std::span<const std::string> labels) {
    Line line;
    line.map = label_of(labels, mean.image);
    if (const auto* profile = any_profile(report, mean.image)) {
        line.frequency = profile->frequency;
        line.unit = profile->unit;
    }
    line.strip = -2;
    line.model = to_string(mean.model);
    line.forward = mean.forward;
    line.side = to_string(mean.side);
    line.component = static_cast<long>(mean.component);
    line.chosen = is_chosen(report, mean.model, mean.forward);
    line.h = mean.h / kpc;
    line.error_noise = mean.error / kpc;
    line.error_scatter = mean.error_scatter / kpc;
    line.error_distance = mean.strips > 0 ? mean.error_distance / kpc : nothing;
    line.error_numerical = mean.numerical_error ? *mean.numerical_error / kpc : nothing;
    line.status = mean.strips > 0 ? "ok" : "no strip";
    return line;
}

bool has_strips(const HeightsReport& report) {
    return std::any_of(report.rows.begin(), report.rows.end(),
                       [](const HeightRow& row) { return row.strip >= 0; });
}

std::vector<Line> lines_of(const HeightsReport& report, std::span<const std::string> labels) {
    std::vector<Line> lines;
    for (const HeightRow& row : report.rows) {
        for (std::size_t c = 0; c < row.fit.component.size(); ++c) {
            lines.push_back(line_of(row, c, report, labels));
        }
    }
    if (has_strips(report)) {
        for (const CombinedHeight& mean : report.combined) {
            lines.push_back(line_of(mean, report, labels));
        }
    }
    return lines;
}

/// Picks one member of every element.
template <class Element, class Pick> auto pick(const std::vector<Element>& elements, Pick&& member) {
    std::vector<std::decay_t<decltype(member(elements.front()))>> values;
    values.reserve(elements.size());
    for (const Element& element : elements) {
        values.push_back(member(element));
    }
    return values;
}

/// Row of the chosen model that fitted this side of a profile.
const HeightRow* chosen_row(const HeightsReport& report, std::size_t profile, double height) {
    for (const HeightRow& row : report.rows) {
        const bool side =
            row.fit.side == profiles::Side::both || (row.fit.side == profiles::Side::above) == (height > 0);
        if (row.chosen && row.profile == profile && side && usable(row.fit.status)) {
            return &row;
        }
    }
    return nullptr;
}

/// "1.234 +- 0.056" with two digits of the error.
std::string with_error(double value, double error) {
    if (!std::isfinite(value)) {
        return "-";
    }
    const double least = std::isfinite(error) && error > 0 ? error : 1e-3 * std::abs(value);
    const int decimals =
        std::clamp(1 - static_cast<int>(std::floor(std::log10(std::max(least, 1e-9)))), 0, 6);
    return fmt::format("{:.{}f} +- {:.{}f}", value, decimals, error, decimals);
}

std::string number(double value) {
    return std::isfinite(value) ? fmt::format("{:.2g}", value) : "-";
}

/// Columns as wide as their widest cell, two blanks between; the first one flush left.
std::vector<std::string> aligned(const std::vector<std::vector<std::string>>& rows) {
    std::vector<std::size_t> width;
    for (const auto& row : rows) {
        width.resize(std::max(width.size(), row.size()));
        for (std::size_t c = 0; c < row.size(); ++c) {
            width[c] = std::max(width[c], row[c].size());
        }
    }
    std::vector<std::string> lines;
    for (const auto& row : rows) {
        std::string line;
        for (std::size_t c = 0; c < row.size(); ++c) {
            line += fmt::format("{:<{}}", row[c], width[c] + 2);
        }
        line.erase(line.find_last_not_of(' ') + 1);
        lines.push_back(line);
    }
    return lines;
}

std::string strip_text(long strip) {
    return strip == -1 ? "all" : strip == -2 ? "mean" : fmt::format("{}", strip);
}

std::string
model_text(const std::string& model, bool forward, const std::string& side, long component, bool several) {
    std::string text = model;
    text += forward ? ", disc" : "";
    text += side == "both" ? "" : ", " + side;
    text += several ? fmt::format(" #{}", component + 1) : "";
    return text;
}

/// The lines that the terminal shows: of the chosen model where there is one, and of single strips only on
/// demand.
std::vector<Line> lines_to_print(const std::vector<Line>& lines, bool any_chosen, bool each_strip) {
    std::vector<Line> printed;
    std::copy_if(lines.begin(), lines.end(), std::back_inserter(printed), [&](const Line& line) {
        return (!any_chosen || line.chosen) && (line.strip < 0 || each_strip);
    });
    return printed;
}

std::vector<std::string> height_lines(const std::vector<Line>& lines, bool with_strips, bool several) {
    std::vector<std::vector<std::string>> rows{{"map"}};
    if (with_strips) {
        rows.front().push_back("strip");
    }
    for (const char* name : {"model", "h/kpc (noise)", "scatter", "numerical", "chi2/dof", "status"}) {
        rows.front().emplace_back(name);
    }
    for (const Line& line : lines) {
        std::vector<std::string> row{line.map};
        if (with_strips) {
            row.push_back(strip_text(line.strip));
        }
        row.push_back(model_text(line.model, line.forward, line.side, line.component, several));
        row.push_back(std::isfinite(line.upper_limit) ? fmt::format("< {:.3g}", line.upper_limit)
                                                      : with_error(line.h, line.error_noise));
        row.push_back(number(line.error_scatter));
        row.push_back(number(line.error_numerical));
        row.push_back(line.dof > 0 ? fmt::format("{:.1f}/{:.0f}", line.chi2, line.dof) : "-");
        row.push_back(line.status);
        rows.push_back(std::move(row));
    }
    return aligned(rows);
}

std::string exponent_line(const HeightExponent& exponent, bool several) {
    const std::string which =
        fmt::format("{} ({})",
                    model_text(to_string(exponent.model), exponent.forward, to_string(exponent.side),
                               static_cast<long>(exponent.component), several),
                    exponent.strip == -2 ? "mean of the strips" : "all strips as one");
    if (!exponent.problem.empty()) {
        return fmt::format("{}: no exponent: {}.", which, exponent.problem);
    }
    const std::string fit = exponent.dof > 0
                                ? fmt::format(", chi2/dof {:.1f}/{:.0f}", exponent.chi2, exponent.dof)
                                : std::string();
    return fmt::format("{}: h ~ nu^eta, eta = {}, h = {} kpc at {:.3g} GHz{}", which,
                       with_error(exponent.eta, exponent.eta_error),
                       with_error(exponent.h0 / kpc, exponent.h0_error / kpc), exponent.frequency / 1e9, fit);
}

} // namespace

std::vector<EcsvColumn> profiles_table(const HeightsReport& report,
                                       std::span<const std::string> labels,
                                       const profiles::HeightsSpec& spec) {
    std::vector<std::string> map;
    std::vector<std::string> unit;
    std::vector<long> strip;
    std::vector<bool> fitted;
    std::vector<double> frequency, height, width, mean, error, model;
    for (std::size_t p = 0; p < report.profiles.size(); ++p) {
        const profiles::Profile& profile = report.profiles[p];
        for (std::size_t b = 0; b < profile.height.size(); ++b) {
            const double z = profile.height[b];
            const HeightRow* row = chosen_row(report, p, z);
            map.push_back(label_of(labels, profile.image));
            unit.push_back(profile.unit);
            strip.push_back(profile.strip);
            frequency.push_back(profile.frequency);
            height.push_back(z / kpc);
            width.push_back(profile.width[b] / kpc);
            mean.push_back(profile.mean[b]);
            error.push_back(profile.errors == profiles::ErrorSource::noiseless ? nothing : profile.error(b));
            model.push_back(row != nullptr && b < row->fit.curve.size() ? row->fit.curve[b] : nothing);
            fitted.push_back(row != nullptr && std::abs(z) >= spec.least_height * (1 - 1e-9) &&
                             std::abs(z) <= spec.greatest_height * (1 + 1e-9) &&
                             std::isfinite(profile.mean[b]));
        }
    }
    return {{"map", "", "label of the map", map},
            {"frequency", "Hz", "", frequency},
            {"strip", "", "-1: all strips as one", strip},
            {"height", "kpc", "mean height of the bin, from the plane of the galaxy as given", height},
            {"width", "kpc", "top hat with the scatter of heights in the bin", width},
            {"mean", "", "in the unit of the column 'unit'", mean},
            {"error", "", "in the unit of the column 'unit'; bins are correlated; none for a noiseless map",
             error},
            {"model", "", "best fit of the chosen model, seen with the beam", model},
            {"unit", "", "", unit},
            {"fitted", "", "whether the bin was fitted", fitted}};
}

std::vector<EcsvColumn> heights_table(const HeightsReport& report, std::span<const std::string> labels) {
    const std::vector<Line> lines = lines_of(report, labels);
    const auto column = [&](const char* name, const char* unit, const char* text, auto member) {
        return EcsvColumn{name, unit, text, pick(lines, [&](const Line& line) { return line.*member; })};
    };
    return {
        column("map", "", "label of the map", &Line::map),
        column("frequency", "Hz", "", &Line::frequency),
        column("strip", "", "-1: all strips as one, -2: flux-weighted mean of the strips", &Line::strip),
        column("model", "", "", &Line::model),
        column("forward", "", "fitted as an inclined disc", &Line::forward),
        column("side", "", "", &Line::side),
        column("component", "", "by ascending height", &Line::component),
        column("chosen", "", "the model chosen for all maps together", &Line::chosen),
        column("h", "kpc", "exp(-|z|/h), exp(-z^2/h^2) or sech^2(z/h)", &Line::h),
        column("error_noise", "kpc", "from the noise of the map", &Line::error_noise),
        column("error_scatter", "kpc", "with the scatter that makes chi2/dof 1", &Line::error_scatter),
        column("error_distance", "kpc", "common to all heights", &Line::error_distance),
        column("error_numerical", "kpc", "of a computed map", &Line::error_numerical),
        column("amplitude", "", "in the unit of the column 'unit'", &Line::amplitude),
        column("chi2", "", "", &Line::chi2),
        column("dof", "", "", &Line::dof),
        column("aicc", "", "", &Line::aicc),
        column("status", "", "", &Line::status),
        column("upper_limit", "kpc", "half the beam where the height is not resolved", &Line::upper_limit),
        column("unit", "", "", &Line::unit)};
}

std::vector<EcsvColumn> exponents_table(const HeightsReport& report) {
    const auto column = [&](const char* name, const char* unit, const char* text, auto member) {
        return EcsvColumn{name, unit, text, pick(report.exponents, member)};
    };
    using E = HeightExponent;
    return {column("model", "", "", [](const E& e) { return to_string(e.model); }),
            column("forward", "", "fitted as an inclined disc", [](const E& e) { return e.forward; }),
            column("side", "", "", [](const E& e) { return to_string(e.side); }),
            column("component", "", "by ascending height",
                   [](const E& e) { return static_cast<long>(e.component); }),
            column("strip", "", "-1: all strips as one, -2: flux-weighted mean of the strips",
                   [](const E& e) { return static_cast<long>(e.strip); }),
            column("maps", "", "that could be used", [](const E& e) { return static_cast<long>(e.maps); }),
            column("frequency", "Hz", "nu0 of h = h0 (nu/nu0)^eta", [](const E& e) { return e.frequency; }),
            column("h0", "kpc", "", [](const E& e) { return e.h0 / kpc; }),
            column("h0_error", "kpc", "without the error of the distance",
                   [](const E& e) { return e.h0_error / kpc; }),
            column("eta", "", "", [](const E& e) { return e.eta; }),
            column("eta_error", "", "", [](const E& e) { return e.eta_error; }),
            column("chi2", "", "", [](const E& e) { return e.chi2; }),
            column("dof", "", "", [](const E& e) { return e.dof; })};
}

Json heights_json(const HeightsReport& report, std::span<const std::string> labels) {
    Json::Array list;
    for (const Line& line : lines_of(report, labels)) {
        if (!line.chosen || line.strip != -1) {
            continue;
        }
        list.push_back(Json::Object{{"map", line.map},
                                    {"frequency_hz", line.frequency > 0 ? Json(line.frequency) : Json()},
                                    {"model", line.model},
                                    {"forward", line.forward},
                                    {"side", line.side},
                                    {"component", line.component},
                                    {"h_kpc", line.h},
                                    {"error_noise_kpc", line.error_noise},
                                    {"error_scatter_kpc", line.error_scatter},
                                    {"error_distance_kpc", line.error_distance},
                                    {"error_numerical_kpc", line.error_numerical},
                                    {"upper_limit_kpc", line.upper_limit},
                                    {"amplitude", line.amplitude},
                                    {"unit", line.unit},
                                    {"chi2", line.chi2},
                                    {"dof", line.dof},
                                    {"aicc", line.aicc},
                                    {"status", line.status}});
    }
    return list;
}

Json exponent_json(const HeightsReport& report) {
    const HeightExponent* best = nullptr;
    for (const HeightExponent& exponent : report.exponents) {
        const bool fits = exponent.strip == -1 && exponent.problem.empty();
        if (fits && (best == nullptr || exponent.component > best->component)) {
            best = &exponent;
        }
    }
    if (best == nullptr) {
        return {};
    }
    return Json::Object{{"model", to_string(best->model)},
                        {"forward", best->forward},
                        {"side", to_string(best->side)},
                        {"component", best->component},
                        {"maps", best->maps},
                        {"eta", best->eta},
                        {"eta_error", best->eta_error},
                        {"h0_kpc", best->h0 / kpc},
                        {"h0_error_kpc", best->h0_error / kpc},
                        {"h0_error_distance_kpc", best->h0_error_distance / kpc},
                        {"frequency_hz", best->frequency},
                        {"chi2", best->chi2},
                        {"dof", best->dof}};
}

std::vector<std::string>
terminal_lines(const HeightsReport& report, std::span<const std::string> labels, bool each_strip) {
    const auto printed = lines_to_print(lines_of(report, labels), report.chosen.has_value(), each_strip);
    const bool several =
        std::any_of(printed.begin(), printed.end(), [](const Line& line) { return line.component > 0; });
    std::vector<std::string> lines = height_lines(printed, has_strips(report), several);
    for (const HeightExponent& exponent : report.exponents) {
        lines.push_back(exponent_line(exponent, several));
    }
    for (const std::string& note : report.notes) {
        lines.push_back(note);
    }
    return lines;
}

} // namespace aureole::report
