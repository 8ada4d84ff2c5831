/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Ranks: blocks of points dealt out over MPI, or over threads when there is one process. A lost
 * rank ends the run with MPI's own message; what it had finished is in the journal. */
#include "ranks.h"

#ifndef TH_WITH_MPI

void cli_ranks_begin(int *argc, char ***argv)
{
    (void)argc;
    (void)argv;
}

int cli_ranks_end(int code)
{
    return code;
}

int cli_rank(void)
{
    return 0;
}

int cli_ranks(void)
{
    return 1;
}

th_status cli_ranks_sweep(const th_case *c, const th_sweep_options *options, th_journal *journal,
                          th_error *err)
{
    return th_sweep_run(c, options, journal, err);
}

void cli_ranks_dismiss(void)
{
}

#else

#include <mpi.h>
#include <stdlib.h>
#include <string.h>

/* Messages. To a worker: a block with the points that are known, or the end. From a worker: a
 * finished point, the end of a block, a failure. */
enum { TAG_BLOCK = 1, TAG_KNOWN, TAG_END, TAG_POINT, TAG_DONE, TAG_FAILED };

void cli_ranks_begin(int *argc, char ***argv)
{
    MPI_Init(argc, argv);
}

/* Set when rank 0 gave up in the middle: workers wait for messages that never come. */
static bool broken;

int cli_ranks_end(int code)
{
    if (broken)
        MPI_Abort(MPI_COMM_WORLD, code);
    MPI_Finalize();
    return code;
}

int cli_rank(void)
{
    int rank;

    MPI_Comm_rank(MPI_COMM_WORLD, &rank);
    return rank;
}

int cli_ranks(void)
{
    int size;

    MPI_Comm_size(MPI_COMM_WORLD, &size);
    return size;
}

void cli_ranks_dismiss(void)
{
    for (int r = 1; cli_rank() == 0 && r < cli_ranks(); r++)
        MPI_Send(NULL, 0, MPI_BYTE, r, TAG_END, MPI_COMM_WORLD);
}

/* A point as bytes: the struct, then its modes. The ranks of a run are copies of one program. */
static th_status send_point(const th_point *point, int to, int tag, th_error *err)
{
    const size_t modes = (size_t)point->count * sizeof *point->mode;
    char *bytes = malloc(sizeof *point + modes);

    if (bytes == NULL)
        return th_fail(err, TH_ENOMEM, "sweep: a point of %d modes as bytes", point->count);
    memcpy(bytes, point, sizeof *point);
    if (modes > 0)
        memcpy(bytes + sizeof *point, point->mode, modes);
    MPI_Send(bytes, (int)(sizeof *point + modes), MPI_BYTE, to, tag, MPI_COMM_WORLD);
    free(bytes);
    return TH_OK;
}

/* The message that `status` announces, as a point. */
static th_status receive_point(MPI_Status *status, th_point *point, th_error *err)
{
    th_workspace *workspace = point->workspace;
    th_point_mode *mode = point->mode;
    const int room = point->room;
    th_status st;
    char *bytes;
    int size, count;

    MPI_Get_count(status, MPI_BYTE, &size);
    bytes = malloc((size_t)size);
    if (bytes == NULL)
        return th_fail(err, TH_ENOMEM, "sweep: a point of %d bytes", size);
    MPI_Recv(bytes, size, MPI_BYTE, status->MPI_SOURCE, status->MPI_TAG, MPI_COMM_WORLD,
             MPI_STATUS_IGNORE);
    memcpy(point, bytes, sizeof *point);
    count = point->count;
    point->workspace = workspace;
    point->mode = mode;
    point->room = room;
    point->count = 0;
    st = th_point_resize(point, count, err);
    if (st == TH_OK && count > 0)
        memcpy(point->mode, bytes + sizeof *point, (size_t)count * sizeof *mode);
    free(bytes);
    return st;
}

static th_status send_to_master(void *ctx, const th_point *point, th_error *err)
{
    (void)ctx;
    return send_point(point, 0, TAG_POINT, err);
}

/* One block from rank 0: message {block, knowns}, then the known points. */
static th_status serve_block(const th_case *c, th_workspace *workspace, MPI_Status *status,
                             th_error *err)
{
    th_point known[TH_SWEEP_BLOCK];
    long block[2];
    th_status st = TH_OK;

    for (int i = 0; i < TH_SWEEP_BLOCK; i++)
        known[i] = (th_point){.workspace = workspace};
    MPI_Recv(block, 2, MPI_LONG, status->MPI_SOURCE, TAG_BLOCK, MPI_COMM_WORLD, MPI_STATUS_IGNORE);
    for (long i = 0; st == TH_OK && i < block[1]; i++) {
        MPI_Probe(0, TAG_KNOWN, MPI_COMM_WORLD, status);
        st = receive_point(status, &known[i], err);
    }
    if (st == TH_OK)
        st = th_sweep_run_block(c, block[0], known, (int)block[1], workspace, send_to_master, NULL,
                                NULL, err);
    for (int i = 0; i < TH_SWEEP_BLOCK; i++)
        th_point_clear(&known[i]);
    return st;
}

/* Blocks until the end; the first failure, which rank 0 is told. */
static th_status serve_all(const th_case *c, th_workspace *workspace, th_error *err)
{
    for (;;) {
        MPI_Status status;
        th_error why = {0};
        th_status st;

        MPI_Probe(0, MPI_ANY_TAG, MPI_COMM_WORLD, &status);
        if (status.MPI_TAG != TAG_BLOCK) {
            MPI_Recv(NULL, 0, MPI_BYTE, 0, TAG_END, MPI_COMM_WORLD, MPI_STATUS_IGNORE);
            return TH_OK;
        }
        st = serve_block(c, workspace, &status, &why);
        if (st == TH_OK) {
            MPI_Send(NULL, 0, MPI_BYTE, 0, TAG_DONE, MPI_COMM_WORLD);
            continue;
        }
        MPI_Send(&why, (int)sizeof why, MPI_BYTE, 0, TAG_FAILED, MPI_COMM_WORLD);
        if (err != NULL)
            *err = why;
        return st;
    }
}

static th_status serve(const th_case *c, th_error *err)
{
    th_workspace *workspace = NULL;
    th_status st;

    if (th_workspace_create(&workspace, NULL) != TH_OK)
        workspace = NULL; /* without one the points only take longer */
    st = serve_all(c, workspace, err);
    th_workspace_destroy(workspace);
    return st;
}

typedef struct {
    const th_case *c;
    const th_sweep_options *options;
    th_journal *journal;
    long next, blocks;
    int busy;
} dealer;

/* Give a worker its next block that is not finished; false when there is none. */
static th_status deal(dealer *d, int to, bool *dealt, th_error *err)
{
    th_point point = {0};
    th_status st = TH_OK;

    *dealt = false;
    while (st == TH_OK && !*dealt && d->next < d->blocks &&
           (d->options->stop == NULL || atomic_load(d->options->stop) == 0)) {
        long message[2] = {d->next, 0}, first;
        int count;

        d->next += d->options->parts;
        th_sweep_block(d->c, message[0], &first, &count);
        while (message[1] < count && th_journal_has(d->journal, first + message[1]))
            message[1]++;
        if (message[1] == count)
            continue;
        MPI_Send(message, 2, MPI_LONG, to, TAG_BLOCK, MPI_COMM_WORLD);
        for (long i = 0; st == TH_OK && i < message[1]; i++) {
            st = th_journal_get(d->journal, first + i, &point, err);
            if (st == TH_OK)
                st = send_point(&point, to, TAG_KNOWN, err);
        }
        *dealt = true;
        d->busy++;
    }
    th_point_clear(&point);
    return st;
}

/* One message from a worker. */
static th_status hear(dealer *d, th_point *point, th_error *err)
{
    MPI_Status status;
    th_status st;
    bool dealt;

    MPI_Probe(MPI_ANY_SOURCE, MPI_ANY_TAG, MPI_COMM_WORLD, &status);
    if (status.MPI_TAG == TAG_POINT) {
        st = receive_point(&status, point, err);
        if (st == TH_OK)
            st = th_journal_append(d->journal, point, err);
        if (st == TH_OK && d->options->done != NULL)
            d->options->done(d->options->ctx, point);
        return st;
    }
    d->busy--;
    if (status.MPI_TAG == TAG_FAILED) {
        th_error why;

        MPI_Recv(&why, (int)sizeof why, MPI_BYTE, status.MPI_SOURCE, TAG_FAILED, MPI_COMM_WORLD,
                 MPI_STATUS_IGNORE);
        if (err != NULL)
            *err = why;
        return why.status;
    }
    MPI_Recv(NULL, 0, MPI_BYTE, status.MPI_SOURCE, TAG_DONE, MPI_COMM_WORLD, MPI_STATUS_IGNORE);
    return deal(d, status.MPI_SOURCE, &dealt, err);
}

th_status cli_ranks_sweep(const th_case *c, const th_sweep_options *options, th_journal *journal,
                          th_error *err)
{
    dealer d = {.c = c, .options = options, .journal = journal};
    th_point point = {0};
    th_status st = TH_OK;
    bool dealt = true;

    if (cli_ranks() == 1)
        return th_sweep_run(c, options, journal, err);
    if (cli_rank() != 0)
        return serve(c, err);
    d.next = options->part - 1;
    d.blocks = th_sweep_blocks(c);
    for (int r = 1; st == TH_OK && dealt && r < cli_ranks(); r++)
        st = deal(&d, r, &dealt, err);
    while (st == TH_OK && d.busy > 0)
        st = hear(&d, &point, err);
    th_point_clear(&point);
    broken = st != TH_OK;
    if (!broken)
        cli_ranks_dismiss();
    return st;
}

#endif
