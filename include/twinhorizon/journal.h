/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * The journal of a sweep: finished points, durable one by one, readable in any order. What goes
 * in: points as they finish. What comes out: the same points, to the last bit, after any
 * interruption. Depends on point, case, status. */
#ifndef TWINHORIZON_JOURNAL_H
#define TWINHORIZON_JOURNAL_H

#include <stdbool.h>
#include <twinhorizon/case.h>
#include <twinhorizon/point.h>
#include <twinhorizon/status.h>

#ifdef __cplusplus
extern "C" {
#endif

typedef struct th_journal th_journal;

/**
 * Start or take up the journal of a sweep, DIR/journal. The file is locked against a second writer.
 *
 * @param[in]  path    of the journal file
 * @param[in]  c       the case; its text stands in the journal's head
 * @param[in]  points  of the whole grid
 * @param[in]  resume  false: the file must not exist; true: it may exist and then continues
 * @param[out] out     owned by the caller; NULL on failure
 *
 * @retval TH_EINVAL  resume: the file is no journal, of another version or format, or of another
 * case (the text names the first line of the case that differs, old and new)
 * @retval TH_EIO     exists although resume is false (the text says that --resume continues it),
 *                    cannot be written, or another process holds it
 * A last line that was cut short or whose checksum fails is dropped with all after it. A file that
 * ends inside its head, where this sweep's head would stand, held no point yet and begins anew.
 */
TH_MUST_USE th_status th_journal_open(const char *path, const th_case *c, long points, bool resume,
                                      th_journal **out, th_error *err);

/** Open a journal for reading only (merge); no lock is taken. *points: of the whole grid;
 * *case_text: borrowed, lives as long as the journal. Errors as th_journal_open. */
TH_MUST_USE th_status th_journal_read_only(const char *path, th_journal **out, long *points,
                                           const char **case_text, th_error *err);

/** Is a point finished? */
bool th_journal_has(const th_journal *journal, long number);

/** How many points are finished. */
long th_journal_count(const th_journal *journal);

/**
 * Add a finished point. It survives the death of the process at once, and that of the machine
 * within a second (a thread of the journal's own calls fsync). One thread at a time may be in any
 * of the functions of a journal.
 * @retval TH_EINVAL  number out of range or finished already, or a number in it is not finite
 * @retval TH_EIO     the file cannot be written; the journal stays readable up to the last point,
 *                    and goes on when there is room again. After a failed fsync it does not.
 */
TH_MUST_USE th_status th_journal_append(th_journal *journal, const th_point *point, th_error *err);

/** Read a finished point into one that was {0} or used before; the same bits that were appended.
 * @retval TH_ENONE  it is not finished
 * @retval TH_EIO    its line cannot be read, or was changed since the journal was opened */
TH_MUST_USE th_status th_journal_get(th_journal *journal, long number, th_point *point,
                                     th_error *err);

/** Bring everything to the disk (TH_EIO) and close; NULL is allowed. The object is gone in any
 * case. */
TH_MUST_USE th_status th_journal_close(th_journal *journal, th_error *err);

#ifdef __cplusplus
}
#endif
#endif
