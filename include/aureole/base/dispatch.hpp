#pragma once

/// Put in front of a hot function in a file free of templates and Eigen: the compiler then builds it for the
/// baseline, for AVX2 and for AVX-512, and the loader picks one. Elsewhere the baseline alone is built.
#if defined(__x86_64__) && defined(__gnu_linux__) && defined(__GNUC__) && !defined(__clang__) &&             \
    !defined(__SANITIZE_ADDRESS__)
#define AUREOLE_HOT __attribute__((target_clones("default", "arch=x86-64-v3", "arch=x86-64-v4")))
#else
#define AUREOLE_HOT
#endif
