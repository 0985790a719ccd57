// Writes a noisy profile and aureole's fit of it in the form scipy_heights.py reads. Usage: write_profile
// MODEL > PROFILE.csv
#include "profiles/layer.hpp"
#include "profiles/synthetic.hpp"

#include "aureole/profiles/fit.hpp"

#include <fmt/format.h>

#include <cmath>

using namespace aureole::profiles;
using synthetic::kpc;

int main(int argc, char** argv) {
    const Model model = parse_model(argc > 1 ? argv[1] : "exponential");
    synthetic::Layer layer;
    if (components(model) == 2) {
        const double sigma = layer.fwhm * synthetic::to_sigma;
        synthetic::fill(layer.image, layer.spec, [&](double, double y) {
            return 400 * convolved(model, 0.35, sigma, y).value + 100 * convolved(model, 2, sigma, y).value;
        });
        layer.clean = layer.image.value;
    }
    synthetic::Normal normal(3);
    const Profile profile = layer.draw(normal);
    const HeightResult fit = fit_height(profile, model, {});
    std::string heights;
    std::string errors;
    for (const Component& part : fit.component) {
        heights += fmt::format(" {:.12g}", part.h / kpc);
        errors += fmt::format(" {:.12g}", part.h_err_noise / kpc);
    }
    fmt::print("# model = {}\n# sigma = {:.17g}\n# h ={}\n# error ={}\nheight,width,mean,covariance\n",
               to_string(model), profile.beam_y / kpc, heights, errors);
    for (std::size_t a = 0; a < profile.mean.size(); ++a) {
        fmt::print("{:.17g},{:.17g},{:.17g}", profile.height[a] / kpc, profile.width[a] / kpc,
                   profile.mean[a]);
        for (std::size_t b = 0; b < profile.mean.size(); ++b) {
            fmt::print(",{:.17g}",
                       profile.covariance(static_cast<Eigen::Index>(a), static_cast<Eigen::Index>(b)));
        }
        fmt::print("\n");
    }
}
