#pragma once

#include <functional>
#include <mutex>
#include <utility>
#include <vector>

namespace aureole {

/// Things that only one thread may use at a time (a file handle, scratch memory), kept and handed out again.
/// Never makes more of them than threads work at once.
template <class T> class Pool {
  public:
    explicit Pool(std::function<T()> make) : make_(std::move(make)) {}

    /// Runs body(T&) with one of them.
    template <class Body> void with(Body&& body) {
        T one = take();
        body(one);
        const std::lock_guard lock(mutex_);
        idle_.push_back(std::move(one));
    }

    /// Visits all of them, when none is in use.
    template <class Visit> void for_each(Visit&& visit) const {
        for (const T& one : idle_) {
            visit(one);
        }
    }

  private:
    T take() {
        {
            const std::lock_guard lock(mutex_);
            if (!idle_.empty()) {
                T one = std::move(idle_.back());
                idle_.pop_back();
                return one;
            }
        }
        return make_();
    }

    std::function<T()> make_;
    std::mutex mutex_;
    std::vector<T> idle_;
};

} // namespace aureole
