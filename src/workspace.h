/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Memory from a workspace, private to the library. A block goes back to the workspace it came from.
 * Without a workspace (NULL) these are calloc, realloc and free. Depends on alloc, status. */
#ifndef TH_WORKSPACE_H
#define TH_WORKSPACE_H

#include <stddef.h>

#include "twinhorizon/workspace.h"

/** count zeroed elements of size bytes, never zero bytes; NULL when memory is short. */
void *th_take(th_workspace *workspace, size_t count, size_t size);

/** A block of another size with the same contents, as realloc: bytes > 0; bytes added are not
 * zeroed; block may be NULL. NULL when memory is short, and then the old block stays. */
void *th_stretch(th_workspace *workspace, void *block, size_t bytes);

/** Give back a block; NULL is allowed. */
void th_give(th_workspace *workspace, void *block);

#endif
