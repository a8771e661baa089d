/* Hot loops that are not kernels are compiled for several instruction sets and chosen when the program
 * starts. Without contraction (-ffp-contract=off) all of them give the same bits. */
#ifndef MT_BASE_VECTOR_H
#define MT_BASE_VECTOR_H

#if defined(__has_feature)
#if __has_feature(address_sanitizer) || __has_feature(thread_sanitizer)
#define MT_NO_CLONES
#endif
#endif

/* The dynamic choice runs before the sanitizers are ready, so they get the plain code. */
#if defined(__x86_64__) && defined(__linux__) && !defined(__SANITIZE_ADDRESS__) &&                           \
    !defined(__SANITIZE_THREAD__) && !defined(MT_NO_CLONES)
#define MT_VECTOR_CLONES __attribute__((target_clones("avx512f", "avx2", "default")))
#else
#define MT_VECTOR_CLONES
#endif

#endif
