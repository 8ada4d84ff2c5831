/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Workspaces. In: sizes. Out: blocks. Calls alloc.
 * A block holds a power of two of bytes; blocks given back wait in a list for each power. Each is
 * an allocation of its own, so that one that is never given back shows as a leak. Under the address
 * checker a waiting block, and what a block holds beyond the bytes asked for, is out of bounds.
 * Proof: tests/test_workspace.c. */
#include "workspace.h"

#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "alloc.h"

#if defined(__has_feature)
#if __has_feature(address_sanitizer)
#define CHECKED
#endif
#elif defined(__SANITIZE_ADDRESS__)
#define CHECKED
#endif

#ifdef CHECKED
#include <sanitizer/asan_interface.h>
#else
#define ASAN_POISON_MEMORY_REGION(start, bytes)   ((void)(start), (void)(bytes))
#define ASAN_UNPOISON_MEMORY_REGION(start, bytes) ((void)(start), (void)(bytes))
#endif

/* Bytes of the smallest block: fewer lists, and half of a shape's parameters. 2^41 bytes of the
 * largest are more than any machine has. */
enum { SMALLEST = 64, POWERS = 36 };

/* What stands before the bytes of a block. */
typedef union block block;
union block {
    struct {
        block *next;  /* waiting: in the list */
        size_t bytes; /* asked for */
        int power;    /* holds SMALLEST 2^power */
    } is;
    max_align_t align;
};

struct th_workspace {
    block *waiting[POWERS];
};

th_status th_workspace_create(th_workspace **out, th_error *err)
{
    if (out == NULL)
        return th_fail(err, TH_EINVAL, "workspace: want a place for the result");
    *out = th_alloc(1, sizeof **out);
    return *out != NULL ? TH_OK : th_fail(err, TH_ENOMEM, "workspace: one object");
}

void th_workspace_destroy(th_workspace *workspace)
{
    for (int p = 0; workspace != NULL && p < POWERS; p++)
        while (workspace->waiting[p] != NULL) {
            block *b = workspace->waiting[p];

            workspace->waiting[p] = b->is.next;
            free(b);
        }
    free(workspace);
}

static size_t room(int power)
{
    return (size_t)SMALLEST << power;
}

/* Bytes of a block's own: zero of them or some, nothing is known of their contents. */
static void *open_block(block *b, size_t bytes)
{
    b->is.bytes = bytes;
    ASAN_POISON_MEMORY_REGION(b + 1, room(b->is.power));
    ASAN_UNPOISON_MEMORY_REGION(b + 1, bytes);
    return b + 1;
}

/* A block with so many bytes, not zeroed. */
static void *take(th_workspace *w, size_t bytes)
{
    block *b;
    int power = 0;

    while (power < POWERS && room(power) < bytes)
        power++;
    if (power == POWERS)
        return NULL;
    b = w->waiting[power];
    if (b != NULL) {
        w->waiting[power] = b->is.next;
    } else {
        b = malloc(sizeof *b + room(power));
        if (b == NULL)
            return NULL;
        b->is.power = power;
    }
    return open_block(b, bytes);
}

void *th_take(th_workspace *workspace, size_t count, size_t size)
{
    void *bytes;

    if (workspace == NULL)
        return th_alloc(count, size);
    if (size > 0 && count > SIZE_MAX / size)
        return NULL;
    bytes = take(workspace, count * size);
    if (bytes != NULL)
        memset(bytes, 0, count * size);
    return bytes;
}

void *th_stretch(th_workspace *workspace, void *old, size_t bytes)
{
    block *b = old;
    void *fresh;

    if (workspace == NULL)
        return realloc(old, bytes);
    if (old == NULL)
        return take(workspace, bytes);
    b--;
    if (bytes <= room(b->is.power))
        return open_block(b, bytes);
    fresh = take(workspace, bytes);
    if (fresh == NULL)
        return NULL;
    memcpy(fresh, old, b->is.bytes);
    th_give(workspace, old);
    return fresh;
}

void th_give(th_workspace *workspace, void *bytes)
{
    block *b = bytes;

    if (workspace == NULL) {
        free(bytes);
        return;
    }
    if (bytes == NULL)
        return;
    b--;
    ASAN_POISON_MEMORY_REGION(bytes, room(b->is.power));
    b->is.next = workspace->waiting[b->is.power];
    workspace->waiting[b->is.power] = b;
}
