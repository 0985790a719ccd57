// How often the 68 % error bars of scale heights hold the truth, on maps with noise correlated like the beam:
// with the right model given, and after a choice among models. Usage: height_coverage [maps] [seed]
#include "profiles/layer.hpp"
#include "profiles/synthetic.hpp"

#include "aureole/profiles/heights.hpp"

#include <fmt/format.h>

#include <chrono>
#include <cmath>
#include <cstdlib>
#include <map>
#include <string>
#include <vector>

using namespace aureole::profiles;
using synthetic::kpc;

namespace {

struct Tally {
    int draws = 0, covered = 0;
    double pull = 0, pull_squared = 0, chi2 = 0, dof = 0;
    void add(const HeightResult& fit, double error, double truth) {
        const double away = (fit.halo().h / kpc - truth) / (error / kpc);
        draws += 1;
        covered += std::abs(away) <= 1 ? 1 : 0;
        pull += away;
        pull_squared += away * away;
        chi2 += fit.chi2;
        dof += fit.dof;
    }
    void print(const std::string& name, int all) const {
        const double share = static_cast<double>(covered) / all;
        fmt::print("{:44} {:6} maps  coverage {:.4f} +- {:.4f}  pull {:+.3f} +- {:.3f}  chi2/dof {:.4f}\n",
                   name, draws, share, std::sqrt(share * (1 - share) / all), pull / draws,
                   std::sqrt(pull_squared / draws - std::pow(pull / draws, 2)), chi2 / dof);
    }
};

} // namespace

int main(int argc, char** argv) {
    const int maps = argc > 1 ? std::atoi(argv[1]) : 4000;
    const auto seed = static_cast<std::uint64_t>(argc > 2 ? std::atoll(argv[2]) : 20240601);
    synthetic::Layer layer;
    synthetic::Normal normal(seed);
    Tally given;
    Tally scattered;
    Tally chosen;
    std::map<Model, int> picks;
    const auto start = std::chrono::steady_clock::now();
    for (int map = 0; map < maps; ++map) {
        const Profile profile = layer.draw(normal);
        std::vector<HeightResult> fits;
        std::vector<ModelScore> scores;
        for (const Model model :
             {Model::exponential, Model::gaussian, Model::sech2, Model::two_exponential}) {
            fits.push_back(fit_height(profile, model, {}));
            const bool good = usable(fits.back().status);
            scores.push_back({model, false, fits.back().parameters,
                              good ? fits.back().aicc : std::numeric_limits<double>::infinity(), false});
        }
        given.add(fits[0], fits[0].halo().h_err_noise, layer.h);
        scattered.add(fits[0], fits[0].halo().h_err_scatter, layer.h);
        if (const auto best = choose(scores)) {
            picks[scores[*best].model] += 1;
            chosen.add(fits[*best], fits[*best].halo().h_err_noise, layer.h);
        }
    }
    const double seconds = std::chrono::duration<double>(std::chrono::steady_clock::now() - start).count();
    fmt::print("exponential layer h = {} kpc, beam {} kpc, peak {} rms per beam, strip 5 beams wide; seed "
               "{}, {:.1f} s\n",
               layer.h, layer.fwhm, layer.peak, seed, seconds);
    given.print("model given, errors from the noise", maps);
    scattered.print("model given, errors with fitted scatter", maps);
    chosen.print("model chosen (all maps count)", maps);
    for (const auto& [model, count] : picks) {
        fmt::print("  chosen {:16} {}\n", to_string(model), count);
    }
}
