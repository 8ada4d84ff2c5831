/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Overflow-checked allocation, private to the library. Depends on nothing. */
#ifndef TH_ALLOC_H
#define TH_ALLOC_H

#include <stdlib.h>

/** count zeroed elements of size bytes, never zero bytes; NULL when memory is short. calloc checks
 * the product. Release with free. */
static inline void *th_alloc(size_t count, size_t size)
{
    return calloc(count > 0 ? count : 1, size);
}

#endif
