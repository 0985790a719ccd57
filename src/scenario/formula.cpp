#include "aureole/scenario/formula.hpp"

#include "aureole/base/error.hpp"

#include <fmt/format.h>
#include <fmt/ranges.h>
#include <muParser.h>

#include <algorithm>
#include <cassert>

namespace aureole::scenario {

struct Formula::State {
    mu::Parser parser;
    std::vector<double> values;
};

namespace {

/// '=' that is not part of ==, <=, >= or !=.
bool has_assignment(const std::string& text) {
    for (std::size_t i = 0; i < text.size(); ++i) {
        if (text[i] != '=') {
            continue;
        }
        if (i + 1 < text.size() && text[i + 1] == '=') {
            ++i;
            continue;
        }
        const char before = i > 0 ? text[i - 1] : ' ';
        if (before != '<' && before != '>' && before != '!') {
            return true;
        }
    }
    return false;
}

} // namespace

Formula::Formula(const std::string& text, std::vector<std::string> variables)
    : state_(std::make_unique<State>()) {
    const auto refuse = [&](const std::string& why) {
        return Error(ErrorKind::scenario, fmt::format("formula \"{}\": {}; known variables: {}", text, why,
                                                      fmt::join(variables, ", ")));
    };
    if (text.size() > 10000) {
        throw Error(ErrorKind::scenario,
                    fmt::format("formula: found {} characters, expected at most 10000", text.size()));
    }
    if (has_assignment(text)) {
        throw refuse("found an assignment, expected an expression (use == to compare)");
    }
    try {
        state_->values.assign(variables.size(), 1.0);
        for (std::size_t i = 0; i < variables.size(); ++i) {
            state_->parser.DefineVar(variables[i], &state_->values[i]);
        }
        state_->parser.SetExpr(text);
        for (const auto& [name, place] : state_->parser.GetUsedVar()) {
            if (std::find(variables.begin(), variables.end(), name) == variables.end()) {
                throw refuse(fmt::format("unknown name \"{}\"", name));
            }
        }
        state_->parser.Eval();
        if (state_->parser.GetNumResults() != 1) {
            throw refuse(fmt::format("found {} expressions, expected one", state_->parser.GetNumResults()));
        }
    } catch (const mu::ParserError& error) {
        throw refuse(error.GetMsg());
    }
}

Formula::~Formula() = default;
Formula::Formula(Formula&&) noexcept = default;
Formula& Formula::operator=(Formula&&) noexcept = default;

double Formula::eval(std::span<const double> values) {
    assert(values.size() == state_->values.size());
    std::copy(values.begin(), values.end(), state_->values.begin());
    try {
        return state_->parser.Eval();
    } catch (const mu::ParserError& error) {
        throw Error(ErrorKind::scenario,
                    fmt::format("formula \"{}\": {}", state_->parser.GetExpr(), error.GetMsg()));
    }
}

} // namespace aureole::scenario
