/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The version: written here and nowhere else. The Makefile, pkg-config file and the metadata of
 * tables take it from here. Depends on nothing. */
#ifndef TWINHORIZON_VERSION_H
#define TWINHORIZON_VERSION_H

#ifdef __cplusplus
extern "C" {
#endif

#define TH_VERSION "0.1.0"

/** Version of the library that runs (TH_VERSION is that of the headers); never NULL. */
const char *th_version(void);

#ifdef __cplusplus
}
#endif
#endif
