#include "aureole/physics/pion_decay.hpp"

#include "kafexhiu_2014.hpp"
#include "kelner_2006.hpp"

#include "aureole/base/constants.hpp"
#include "aureole/base/error.hpp"
#include "aureole/base/quadrature.hpp"

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>

namespace aureole::physics {

namespace {

constexpr double gev = constants::gigaelectronvolt;
constexpr double mb_per_gev = constants::millibarn / gev;

kafexhiu_2014::Branch branch_of(PionModel model) {
    switch (model) {
    case PionModel::kafexhiu_2014_geant4:
        return kafexhiu_2014::Branch::geant4;
    case PionModel::kafexhiu_2014_sibyll:
        return kafexhiu_2014::Branch::sibyll;
    case PionModel::kafexhiu_2014_qgsjet:
        return kafexhiu_2014::Branch::qgsjet;
    default:
        return kafexhiu_2014::Branch::pythia8;
    }
}

constexpr double borders_erg[] = {0.56 * gev, 1 * gev,  2 * gev,  4 * gev,
                                  5 * gev,    20 * gev, 50 * gev, 100 * gev};

} // namespace

double pion_threshold() {
    return kafexhiu_2014::threshold * gev;
}

double inelastic_cross_section(PionModel model, double kinetic_energy) {
    const double t = kinetic_energy / gev;
    const double mb = model == PionModel::kelner_2006 ? kelner_2006::inelastic(t + kelner_2006::proton)
                                                      : kafexhiu_2014::inelastic(t);
    return mb * constants::millibarn;
}

double neutral_pion_cross_section(PionModel model, double kinetic_energy) {
    const double t = kinetic_energy / gev;
    if (model == PionModel::kelner_2006) {
        throw Error(ErrorKind::runtime,
                    "neutral pions: kelner_2006 gives photons only, expected a kafexhiu_2014 model");
    }
    const double mb = model == PionModel::kafexhiu_2014_continuous
                          ? kafexhiu_2014::continuous_neutral_pions(t)
                          : kafexhiu_2014::neutral_pions(branch_of(model), t);
    return mb * constants::millibarn;
}

PhotonRange pion_photon_range(double kinetic_energy) {
    const double t = kinetic_energy / gev;
    if (t <= kafexhiu_2014::threshold) {
        return {std::numeric_limits<double>::infinity(), 0};
    }
    const double highest = kafexhiu_2014::highest_photon(kafexhiu_2014::highest_pion(t));
    return {kafexhiu_2014::pion * kafexhiu_2014::pion / (4 * highest) * gev, highest * gev};
}

double minimum_proton_energy(PionModel model, double photon_energy) {
    const double e = photon_energy / gev;
    if (model == PionModel::kelner_2006) {
        return kelner_2006::lowest_proton(e) * gev;
    }
    return kafexhiu_2014::lowest_proton(e + kafexhiu_2014::pion * kafexhiu_2014::pion / (4 * e)) * gev;
}

double pion_gamma_cross_section(PionModel model, double photon_energy, double kinetic_energy) {
    const double e = photon_energy / gev;
    const double t = kinetic_energy / gev;
    switch (model) {
    case PionModel::kafexhiu_2014_continuous:
        return kafexhiu_2014::continuous_spectrum(e, t) * mb_per_gev;
    case PionModel::kelner_2006:
        return kelner_2006::gamma(e, t, kelner_2006::usual_multiplicity) * mb_per_gev;
    default:
        return kafexhiu_2014::published_spectrum(branch_of(model), e, t) * mb_per_gev;
    }
}

double kelner_2006_cross_section(double photon_energy, double kinetic_energy, double multiplicity) {
    return kelner_2006::gamma(photon_energy / gev, kinetic_energy / gev, multiplicity) * mb_per_gev;
}

double kelner_2006_multiplicity(double slope) {
    return kelner_2006::multiplicity(slope);
}

double kelner_2006_spectrum(double x, double total_energy) {
    return kelner_2006::spectrum(x, total_energy / gev);
}

std::span<const double> pion_borders(PionModel model) {
    if (model == PionModel::kelner_2006) {
        return {};
    }
    if (model == PionModel::kafexhiu_2014_continuous) {
        return kafexhiu_2014::continuous_borders();
    }
    return borders_erg;
}

} // namespace aureole::physics
