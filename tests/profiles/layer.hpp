#pragma once

#include "synthetic.hpp"

#include "aureole/profiles/models.hpp"
#include "aureole/profiles/profile.hpp"

#include <vector>

namespace synthetic {

/// Maps of one exponential layer with noise correlated like the beam: one wide strip, both sides.
struct Layer {
    double h = 1.4, fwhm = 0.6, pixel = 0.15, rms = 1, peak = 25;
    aureole::profiles::ProfileSpec spec = synthetic::spec(1, 3.0, 0.3, 5.4);
    aureole::maps::Image image = blank_map(24, 76, 0.15, 0.6);
    std::vector<float> clean;
    aureole::profiles::Plan made;

    Layer() {
        spec.rms = rms;
        fill(image, spec, [&](double, double y) {
            return peak *
                   aureole::profiles::convolved(aureole::profiles::Model::exponential, h, fwhm * to_sigma, y)
                       .value;
        });
        clean = image.value;
        made = aureole::profiles::plan(image, spec);
    }
    aureole::profiles::Profile draw(Normal& normal) {
        const auto noise = beam_noise(image.pixels.nx, image.pixels.ny, fwhm * to_sigma / pixel, normal);
        for (std::size_t k = 0; k < clean.size(); ++k) {
            image.value[k] = clean[k] + static_cast<float>(rms * noise[k]);
        }
        return aureole::profiles::measure(image, spec, made).back();
    }
};

} // namespace synthetic
