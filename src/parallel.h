/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Work dealt out to threads, private to the library. Depends on status. */
#ifndef TH_PARALLEL_H
#define TH_PARALLEL_H

#include <stdatomic.h>
#include <stddef.h>
#include "twinhorizon/status.h"

/** One item of work. Items run side by side: what they share is their own business. */
typedef th_status (*th_work)(void *ctx, long item, th_error *err);

/**
 * Run items 0 .. items - 1 on threads, dealt out one by one in ascending order.
 *
 * @param[in] threads  >= 1; 1 runs in the caller's thread
 * @param[in] stop     when it becomes nonzero no further item is dealt; may be NULL
 * @retval    the status of the lowest item that failed (no item is dealt after a failure), or TH_OK
 * @retval TH_ENOMEM   threads cannot be made
 */
TH_MUST_USE th_status th_parallel(int threads, long items, th_work work, void *ctx,
                                  const atomic_int *stop, th_error *err);

#endif
