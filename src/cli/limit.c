/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * --time-limit: a command that takes longer ends with one sentence, and leaves no part of a file. A
 * sweep keeps what it has finished instead: it puts its own handler in the place of this one. */
#include <signal.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "cli.h"

/* What the handler needs, ready made: it may only call what is safe in a signal handler. */
static char sentence[128];
static char part[2 * CLI_OUTPUTS_MAX][CLI_PATH_MAX + 32];
static int parts;

static void too_late(int number)
{
    (void)number;
    for (int i = 0; i < parts; i++)
        (void)unlink(part[i]);
    (void)!write(STDERR_FILENO, sentence, strlen(sentence));
    _exit(CLI_UNDECIDED);
}

th_status cli_limit_start(const char *command, const char *text, const cli_arguments *arguments,
                          th_error *err)
{
    struct sigaction action;
    int seconds = 0;
    th_status st;

    if (text == NULL)
        return TH_OK;
    st = cli_whole(command, "--time-limit", text, 1, 100000000, 0, &seconds, err);
    if (st != TH_OK)
        return st;
    for (int i = 0; i < arguments->outputs; i++) {
        const char *path = *arguments->output[i]->place;

        if (strcmp(path, "-") == 0)
            continue;
        (void)snprintf(part[parts++], sizeof part[0], "%s.part", path);
        (void)snprintf(part[parts++], sizeof part[0], "%s-metadata.json.part", path);
    }
    (void)snprintf(sentence, sizeof sentence,
                   "twinhorizon: %s: the time limit of %d s is over, there is no answer\n", command,
                   seconds);
    memset(&action, 0, sizeof action);
    action.sa_handler = too_late;
    (void)sigemptyset(&action.sa_mask);
    (void)sigaction(SIGALRM, &action, NULL);
    (void)alarm((unsigned)seconds);
    return TH_OK;
}
