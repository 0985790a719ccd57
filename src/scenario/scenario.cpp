#include "aureole/scenario/scenario.hpp"

#include "scenario/profile_names.hpp"

#include "aureole/base/error.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <set>

namespace aureole::scenario {

bool Scenario::has(std::string_view key) const {
    return entries_.find(key) != entries_.end();
}

bool Scenario::is_set(std::string_view key) const {
    const auto found = entries_.find(key);
    return found != entries_.end() && found->second.given;
}

bool Scenario::has_transport() const {
    const auto solved = [&](std::string_view key) {
        const auto found = entries_.find(key);
        return found != entries_.end() && found->second.value == Value(std::string("transport"));
    };
    const auto first = entries_.lower_bound("transport.");
    return (first != entries_.end() && first->first.starts_with("transport.")) ||
           solved("electrons.source") || solved("protons.source");
}

const Value& Scenario::value(std::string_view key) const {
    const auto found = entries_.find(key);
    if (found == entries_.end()) {
        throw Error(ErrorKind::scenario,
                    fmt::format("{}: {}: missing, expected a value", file_.string(), key));
    }
    return found->second.value;
}

double Scenario::quantity(std::string_view key) const {
    return std::get<double>(value(key));
}

double Scenario::number(std::string_view key) const {
    return std::get<double>(value(key));
}

long Scenario::integer(std::string_view key) const {
    return std::get<long>(value(key));
}

bool Scenario::boolean(std::string_view key) const {
    return std::get<bool>(value(key));
}

std::string Scenario::text(std::string_view key) const {
    return has(key) ? std::get<std::string>(value(key)) : std::string();
}

std::vector<double> Scenario::quantities(std::string_view key) const {
    return std::get<std::vector<double>>(value(key));
}

std::vector<std::string> Scenario::texts(std::string_view key) const {
    return std::get<std::vector<std::string>>(value(key));
}

std::filesystem::path Scenario::path(std::string_view key) const {
    const std::string found = text(key);
    return found.empty() ? std::filesystem::path() : (file_.parent_path() / found).lexically_normal();
}

ProfileSpec Scenario::profile(const std::string& prefix) const {
    const auto* const name = std::find(profile_names.begin(), profile_names.end(),
                                       std::get<std::string>(value(prefix + ".profile")));
    ProfileSpec profile;
    profile.kind = static_cast<ProfileKind>(name - profile_names.begin());
    profile.value = quantity(prefix + ".value");
    profile.radius = quantity(prefix + ".radius");
    profile.height = quantity(prefix + ".height");
    profile.core = quantity(prefix + ".core");
    profile.slope = number(prefix + ".slope");
    profile.flare = quantity(prefix + ".flare");
    profile.formula = text(prefix + ".formula");
    profile.key = prefix;
    return profile;
}

std::vector<std::string> Scenario::names(const std::string& prefix) const {
    std::set<std::string> found;
    for (auto entry = entries_.lower_bound(prefix + "."); entry != entries_.end(); ++entry) {
        if (!entry->first.starts_with(prefix + ".")) {
            break;
        }
        const std::string rest = entry->first.substr(prefix.size() + 1);
        found.insert(rest.substr(0, rest.find('.')));
    }
    return {found.begin(), found.end()};
}

} // namespace aureole::scenario
