/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Statuses and error texts. Every public function that can fail returns a th_status and takes
 * a nullable th_error as its last argument. Depends on nothing. */
#ifndef TWINHORIZON_STATUS_H
#define TWINHORIZON_STATUS_H

#ifdef __cplusplus
extern "C" {
#endif

#if defined(__GNUC__)
#define TH_MUST_USE            __attribute__((warn_unused_result))
#define TH_PRINTF(text, first) __attribute__((format(printf, text, first)))
#else
#define TH_MUST_USE
#define TH_PRINTF(text, first)
#endif

/* The one list of statuses: name, short text. */
#define TH_STATUS_LIST(X)                                                                          \
    X(TH_OK, "done")                                                                               \
    X(TH_EINVAL, "an argument breaks a rule")                                                      \
    X(TH_ECASE, "the case file breaks a rule")                                                     \
    X(TH_EIO, "a file cannot be read or written")                                                  \
    X(TH_ENOMEM, "out of memory")                                                                  \
    X(TH_ECONVERGE, "an iteration did not converge")                                               \
    X(TH_EUNDECIDED, "the computation cannot tell")                                                \
    X(TH_ENONE, "no such value exists")                                                            \
    X(TH_EBUG, "internal error")

typedef enum {
#define TH_STATUS_ENUM(name, text) name,
    TH_STATUS_LIST(TH_STATUS_ENUM)
#undef TH_STATUS_ENUM
} th_status;

/**
 * What went wrong, in one sentence without a trailing full stop or newline.
 * `key` names the case-file key that broke the rule ("" when none is to blame), so that a caller
 * who knows the file can add its name and line.
 */
typedef struct {
    th_status status;
    char key[32];
    char text[512];
} th_error;

/** Short text of a status; never NULL. */
const char *th_status_text(th_status status);

/** Fill err (when not NULL) with status and a formatted sentence, key empty; returns status. */
th_status th_fail(th_error *err, th_status status, const char *format, ...) TH_PRINTF(3, 4);

/** As th_fail, and names the case-file key that is to blame. */
th_status th_fail_key(th_error *err, th_status status, const char *key, const char *format, ...)
    TH_PRINTF(4, 5);

#ifdef __cplusplus
}
#endif
#endif
