/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Memory that goes round: blocks that one flow gives back serve the next, so that a row of flows
 * costs no allocation each. What goes in: nothing. What comes out: a handle for
 * th_flow_setup.workspace, from which matching function and census of the flow take it. Depends on
 * status. */
#ifndef TWINHORIZON_WORKSPACE_H
#define TWINHORIZON_WORKSPACE_H

#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

/* One thread at a time. Wherever a workspace is asked for NULL stands for plain memory; results are
 * the same. */
typedef struct th_workspace th_workspace;

/** An empty workspace: it grows as it is used, and keeps what is given back until it is destroyed.
 * @retval TH_ENOMEM  *out is NULL */
TH_MUST_USE th_status th_workspace_create(th_workspace **out, th_error *err);

/** Release a workspace, after everything that was made in it; NULL is allowed. */
void th_workspace_destroy(th_workspace *workspace);

#ifdef __cplusplus
}
#endif
#endif
