/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Statuses and error texts: the bottom of the house, calls nobody. */
#include "twinhorizon/status.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

const char *th_status_text(th_status status)
{
    switch (status) {
#define TH_STATUS_CASE(name, text)                                                                 \
    case name:                                                                                     \
        return text;
        TH_STATUS_LIST(TH_STATUS_CASE)
#undef TH_STATUS_CASE
    }
    return "unknown status";
}

static void fill(th_error *err, th_status status, const char *key, const char *format, va_list args)
{
    err->status = status;
    (void)snprintf(err->key, sizeof err->key, "%s", key);
    (void)vsnprintf(err->text, sizeof err->text, format, args);
}

th_status th_fail(th_error *err, th_status status, const char *format, ...)
{
    if (err != NULL) {
        va_list args;

        va_start(args, format);
        fill(err, status, "", format, args);
        va_end(args);
    }
    return status;
}

th_status th_fail_key(th_error *err, th_status status, const char *key, const char *format, ...)
{
    if (err != NULL) {
        va_list args;

        va_start(args, format);
        fill(err, status, key, format, args);
        va_end(args);
    }
    return status;
}
