#pragma once

#include <span>
#include <vector>

namespace aureole::transport {

/// Anderson acceleration of a fixed-point iteration u -> g(u) (Anderson 1965, J. ACM 12, 547; Walker & Ni
/// 2011, SIAM J. Num. Anal. 49, 1715), from the last few pairs.
class Mixing {
  public:
    /// The next u from a pair u, g(u); no component moves further than `largest_step`.
    std::vector<double> next(std::span<const double> u, std::span<const double> g, double largest_step);
    void forget();

  private:
    std::vector<double> last_g_, last_f_;
    std::vector<std::vector<double>> changes_g_, changes_f_;
};

} // namespace aureole::transport
