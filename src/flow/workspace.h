/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The workspace of a flow, private to the library: what is made of a flow and dies before it takes
 * its memory there. */
#ifndef TH_FLOW_WORKSPACE_H
#define TH_FLOW_WORKSPACE_H

#include "twinhorizon/flow.h"
#include "../workspace.h"

/** The workspace in the setup that the flow was built of; NULL: plain memory. */
th_workspace *th_flow_workspace(const th_flow *flow);

#endif
