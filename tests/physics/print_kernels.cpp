/// Prints a handful of kernel values as CSV, name,a,b,c,value, for tests/outside/scipy_kernels.py to
/// recompute.

#include "aureole/base/constants.hpp"
#include "aureole/physics/bremsstrahlung.hpp"
#include "aureole/physics/inverse_compton.hpp"
#include "aureole/physics/losses.hpp"
#include "aureole/physics/pion_decay.hpp"
#include "aureole/physics/synchrotron.hpp"

#include <cstdio>
#include <utility>

namespace {

void print(const char* name, double a, double b, double c, double value) {
    std::printf("%s,%.17g,%.17g,%.17g,%.17g\n", name, a, b, c, value);
}

} // namespace

int main() {
    using namespace aureole::physics;
    using aureole::constants::electron_rest_energy;
    using aureole::constants::electronvolt;
    using aureole::constants::gigaelectronvolt;
    using aureole::constants::millibarn;
    std::puts("name,a,b,c,value");
    for (const double x : {1e-4, 0.03, 0.5, 3.0, 40.0}) {
        print("f", x, 0, 0, synchrotron_f(x));
        print("g", x, 0, 0, synchrotron_g(x));
        print("random", x, 0, 0, synchrotron_random(x));
    }
    for (const double t : {0.05, 0.5, 0.95}) {
        for (const double x : {1e-3, 0.3, 5.0}) {
            const MixedField mixed = mixed_field(x, t);
            print("mixed_f", x, t, 0, mixed.total);
            print("mixed_g", x, t, 0, mixed.polarised);
        }
    }
    for (const double temperature : {2.7255, 30.0, 4000.0}) {
        for (const double gamma : {1e3, 1e6, 1e8}) {
            const double fraction = 4 * gamma * 1.38e-16 * temperature / electron_rest_energy;
            for (const double scale : {0.05, 1.0, 4.0}) {
                const double z = scale * fraction / (1 + scale * fraction);
                const double eps1 = z * gamma * electron_rest_energy / electronvolt;
                print("inverse_compton", gamma, eps1, temperature,
                      inverse_compton_blackbody_kernel(gamma, eps1 * electronvolt, temperature));
            }
        }
    }
    const BlackbodyLoss blackbody;
    for (const auto& [gamma, temperature] :
         {std::pair{3e5, 30.0}, std::pair{7.8e6, 2.7255}, std::pair{2e5, 4000.0}, std::pair{1e8, 4000.0}}) {
        print("blackbody_loss", gamma, temperature, 0, blackbody.factor(gamma, temperature));
    }
    for (const double e0 : {0.02, 1.0, 50.0}) { // GeV
        for (const double fraction : {0.01, 0.3, 0.8}) {
            const double scale = gigaelectronvolt / millibarn;
            const double total = e0 * gigaelectronvolt;
            const double k = fraction * total;
            print("bethe_heitler", e0, fraction, 0, scale * bremsstrahlung_bethe_heitler(total, k));
            print("screened_h", e0, fraction, 0, scale * bremsstrahlung_screened(Atom::hydrogen, total, k));
            print("screened_he", e0, fraction, 0, scale * bremsstrahlung_screened(Atom::helium, total, k));
        }
    }
    for (const double t : {0.6, 1.5, 4.0, 10.0, 60.0, 1000.0}) {
        for (const double e : {0.02, 0.1, 1.0}) {
            const double scale = gigaelectronvolt / millibarn;
            print("kafexhiu", e, t, 0,
                  scale * pion_gamma_cross_section(PionModel::kafexhiu_2014, e * gigaelectronvolt,
                                                   t * gigaelectronvolt));
            print("continuous", e, t, 0,
                  scale * pion_gamma_cross_section(PionModel::kafexhiu_2014_continuous, e * gigaelectronvolt,
                                                   t * gigaelectronvolt));
        }
    }
    for (const double t : {200.0, 3000.0}) {
        print("kelner", 150, t, 0,
              gigaelectronvolt / millibarn *
                  pion_gamma_cross_section(PionModel::kelner_2006, 150 * gigaelectronvolt,
                                           t * gigaelectronvolt));
    }
}
