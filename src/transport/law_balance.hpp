#pragma once

#include <cmath>

namespace aureole::transport {

/// F of  linear F + cascade F^(3/2) + landau F^2 = growth, from `root`, the root of the least of the balances
/// with one term each; see wave_energy(). No branches and no library calls, so that loops over places become
/// vector code. In the worst case, three equal terms, six steps from x = 1 reach rounding.
inline double balance(double growth, double linear, double cascade, double landau, double root) {
    const double scale = root * root / growth;
    const double a = linear * scale;
    const double b = cascade * scale * root;
    const double c = landau * scale * root * root;
    double x = 1; // sqrt(F)/root
    for (int step = 0; step < 6; ++step) {
        const double excess = x * x * (a + x * (b + x * c)) - 1;
        x -= excess / (x * (2 * a + x * (3 * b + 4 * c * x)));
    }
    return root * root * x * x;
}

/// (growth/cascade)^(2/3): the balance of the cascade alone.
inline double cascade_balance(double growth, double cascade) {
    const double root = std::cbrt(growth / cascade);
    return root * root;
}

} // namespace aureole::transport
