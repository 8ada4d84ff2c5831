/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Stands between the library and its allocator, for a test program that includes this file (the
 * Makefile then links it with --wrap). Use:
 *     for (long k = 0;; k++) {
 *         refuse_from(k);                  the k-th allocation from here, and all after it, fail
 *         status = th_thing(...);
 *         if (refuse_stop()) break;        none was refused: the call had enough
 *         assert_int_equal(status, TH_ENOMEM);
 *     } */
#ifndef TESTS_REFUSE_H
#define TESTS_REFUSE_H

#include <stdbool.h>
#include <stddef.h>

void *__real_calloc(size_t count, size_t size);
void *__real_malloc(size_t size);
void *__real_realloc(void *old, size_t size);
void *__wrap_calloc(size_t count, size_t size);
void *__wrap_malloc(size_t size);
void *__wrap_realloc(void *old, size_t size);

static long refuse_left = -1; /* allocations still granted; -1: all */
static bool refuse_happened;

static inline void refuse_from(long k)
{
    refuse_left = k;
    refuse_happened = false;
}

/* Grant everything again; true when nothing was refused. */
static inline bool refuse_stop(void)
{
    refuse_left = -1;
    return !refuse_happened;
}

static bool refuse_this(void)
{
    if (refuse_left < 0)
        return false;
    if (refuse_left > 0) {
        refuse_left--;
        return false;
    }
    refuse_happened = true;
    return true;
}

void *__wrap_calloc(size_t count, size_t size)
{
    return refuse_this() ? NULL : __real_calloc(count, size);
}

void *__wrap_malloc(size_t size)
{
    return refuse_this() ? NULL : __real_malloc(size);
}

void *__wrap_realloc(void *old, size_t size)
{
    return refuse_this() ? NULL : __real_realloc(old, size);
}

#endif
