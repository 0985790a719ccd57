#pragma once

#include <cstddef>
#include <cstdlib>
#include <memory>
#include <new>
#include <vector>

#if defined(__linux__)
#include <sys/mman.h>
#endif

namespace aureole {

/// Memory for arrays of hundreds of megabytes: elements are not set to zero, so that the threads that fill
/// the array are the first to touch it, and the system may use large pages, which saves page faults and waits
/// for the address tables when it is read in no order.
template <class T> struct LargeAllocator {
    using value_type = T;
    static constexpr std::size_t page = std::size_t{2} << 20;

    LargeAllocator() = default;
    template <class U> LargeAllocator(const LargeAllocator<U>&) {}

    T* allocate(std::size_t count) {
        const std::size_t bytes = count * sizeof(T);
        if (bytes < page) {
            return std::allocator<T>().allocate(count);
        }
        void* memory = std::aligned_alloc(page, (bytes + page - 1) / page * page);
        if (memory == nullptr) {
            throw std::bad_alloc();
        }
#if defined(__linux__)
        madvise(memory, bytes, MADV_HUGEPAGE); // a wish; nothing depends on it
#endif
        return static_cast<T*>(memory);
    }
    void deallocate(T* memory, std::size_t count) {
        if (count * sizeof(T) < page) {
            std::allocator<T>().deallocate(memory, count);
        } else {
            std::free(memory);
        }
    }
    /// Elements made without a value have none.
    template <class U> void construct(U* place) {
        ::new (static_cast<void*>(place)) U;
    }
    template <class U, class... Arguments> void construct(U* place, Arguments&&... arguments) {
        ::new (static_cast<void*>(place)) U(std::forward<Arguments>(arguments)...);
    }
    friend bool operator==(const LargeAllocator&, const LargeAllocator&) {
        return true;
    }
};

template <class T> using LargeArray = std::vector<T, LargeAllocator<T>>;

} // namespace aureole
