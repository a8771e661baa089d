#include "core/base/memory.h"

#include <stdatomic.h>
#include <stdlib.h>
#include <string.h>

/* A header of one alignment unit in front of each block keeps its size. */
typedef struct header {
    size_t bytes;
} header;

static atomic_size_t used, peak, blocks;
static atomic_long countdown = -1;
static atomic_bool failed;

static bool must_fail(void) {
    if (atomic_load(&countdown) < 0) return false;
    if (atomic_fetch_sub(&countdown, 1) != 0) return false;
    atomic_store(&failed, true);
    return true;
}

static header *head_of(void *block) {
    return (header *)((char *)block - MT_ALIGN);
}

static void count_in(size_t bytes) {
    size_t now = atomic_fetch_add(&used, bytes) + bytes, top = atomic_load(&peak);
    while (now > top && !atomic_compare_exchange_weak(&peak, &top, now)) {}
    atomic_fetch_add(&blocks, 1);
}

void *mt_alloc(size_t count, size_t size) {
    size_t bytes;
    if (__builtin_mul_overflow(count, size, &bytes) || bytes > SIZE_MAX / 2 || must_fail()) return NULL;
    size_t whole = mt_round_up(bytes, MT_ALIGN) + MT_ALIGN;
    header *h = aligned_alloc(MT_ALIGN, whole);
    if (!h) return NULL;
    memset(h, 0, whole);
    h->bytes = bytes;
    count_in(bytes);
    return (char *)h + MT_ALIGN;
}

mt_status mt_new(void *out, size_t count, size_t size, const char *what, mt_error *err) {
    void *block = mt_alloc(count, size);
    memcpy(out, &block, sizeof block);
    if (block) return MT_OK;
    return mt_fail(err, MT_ENOMEM, "no memory for %s: %.4g MB could not be had", what,
                   (double)count * (double)size / 1e6);
}

void *mt_resize(void *block, size_t count, size_t size) {
    void *fresh = mt_alloc(count, size);
    if (!fresh || !block) return fresh;
    size_t old = head_of(block)->bytes, now = head_of(fresh)->bytes;
    memcpy(fresh, block, old < now ? old : now);
    mt_free(block);
    return fresh;
}

void mt_free(void *block) {
    if (!block) return;
    header *h = head_of(block);
    atomic_fetch_sub(&used, h->bytes);
    atomic_fetch_sub(&blocks, 1);
    free(h);
}

char *mt_copy_text(const char *text) {
    size_t n = strlen(text) + 1;
    char *copy = mt_alloc(n, 1);
    if (copy) memcpy(copy, text, n);
    return copy;
}

size_t mt_memory_used(void) {
    return atomic_load(&used);
}
size_t mt_memory_peak(void) {
    return atomic_load(&peak);
}
void mt_memory_reset_peak(void) {
    atomic_store(&peak, atomic_load(&used));
}
size_t mt_memory_blocks(void) {
    return atomic_load(&blocks);
}

void mt_memory_fail_at(long k) {
    atomic_store(&failed, false);
    atomic_store(&countdown, k);
}

bool mt_memory_did_fail(void) {
    return atomic_load(&failed);
}
