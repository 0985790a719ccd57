#pragma once

#include <cstddef>
#include <new>
#include <utility>
#include <vector>

namespace aureole {

/// Elements are not set to zero when an array is made, so that the threads that fill a large array are the
/// first to touch it. The first one begins a cache line.
template <class T> struct UnsetAllocator {
    using value_type = T;
    static constexpr std::align_val_t alignment{64};

    UnsetAllocator() = default;
    template <class U> UnsetAllocator(const UnsetAllocator<U>&) {}
    T* allocate(std::size_t count) { return static_cast<T*>(::operator new(count * sizeof(T), alignment)); }
    void deallocate(T* memory, std::size_t) { ::operator delete(memory, alignment); }
    template <class U> void construct(U* place) { ::new (static_cast<void*>(place)) U; }
    template <class U, class... Arguments> void construct(U* place, Arguments&&... arguments) {
        ::new (static_cast<void*>(place)) U(std::forward<Arguments>(arguments)...);
    }
    friend bool operator==(const UnsetAllocator&, const UnsetAllocator&) { return true; }
};

template <class T> using LargeArray = std::vector<T, UnsetAllocator<T>>;

} // namespace aureole
