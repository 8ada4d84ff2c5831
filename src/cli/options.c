/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Command lines of the commands, and failures as exit codes. */
#include <limits.h>
#include <math.h>
#include <stdarg.h>
#include <string.h>
#include <unistd.h>

#include "cli.h"

/* More threads than any machine has cores. */
enum { THREADS_MAX = 1024 };

/* One line, whatever words of the user it holds: control characters become \xHH. */
static void complain(const char *text)
{
    fputs("twinhorizon: ", stderr);
    for (; *text != '\0'; text++)
        if ((unsigned char)*text < 0x20 || *text == 0x7f)
            fprintf(stderr, "\\x%02x", (unsigned)(unsigned char)*text);
        else
            fputc(*text, stderr);
    fputc('\n', stderr);
}

int cli_usage(const char *format, ...)
{
    char text[2 * sizeof((th_error *)0)->text];
    va_list args;

    va_start(args, format);
    (void)vsnprintf(text, sizeof text, format, args);
    va_end(args);
    complain(text);
    return CLI_USAGE;
}

int cli_failed(const th_error *err)
{
    complain(err->text);
    switch (err->status) {
    case TH_EINVAL:
    case TH_ECASE:
    case TH_EIO:
        return CLI_USAGE;
    case TH_ECONVERGE:
    case TH_EUNDECIDED:
    case TH_ENONE:
        return CLI_UNDECIDED;
    case TH_OK:
    case TH_ENOMEM:
    case TH_EBUG:
        break;
    }
    return CLI_INTERNAL;
}

static void help(const char *command, const char *summary, const cli_option *option, int options)
{
    printf("twinhorizon %s CASE [--set SECTION.KEY=VALUE]...", command);
    for (int i = 0; i < options; i++) {
        const bool needed = option[i].use == CLI_NEEDED;

        printf(" %s%s%s%s%s", needed ? "" : "[", option[i].name, option[i].value != NULL ? " " : "",
               option[i].value != NULL ? option[i].value : "", needed ? "" : "]");
    }
    printf("\n\n%s\n\n", summary);
    printf("  %-22s %s\n", "--set SECTION.KEY=VALUE", "override or add a key of the case file");
    printf("  %-23s %s\n", "--time-limit SECONDS",
           "end after that time; a sweep keeps what is done");
    for (int i = 0; i < options; i++) {
        char both[64];

        (void)snprintf(both, sizeof both, "%s %s", option[i].name,
                       option[i].value != NULL ? option[i].value : "");
        printf("  %-23s %s\n", both, option[i].doc);
    }
}

static const cli_option *find(const char *name, const cli_option *option, int options)
{
    for (int i = 0; i < options; i++)
        if (strcmp(name, option[i].name) == 0)
            return &option[i];
    return NULL;
}

int cli_read(const char *command, const char *summary, int argc, char **argv,
             const cli_option *option, int options, cli_arguments *out)
{
    const char *limit = NULL;
    th_error err = {0};

    memset(out, 0, sizeof *out);
    for (int i = 0; i < argc; i++) {
        const bool set = strcmp(argv[i], "--set") == 0, late = strcmp(argv[i], "--time-limit") == 0;
        const cli_option *found = find(argv[i], option, options);
        const bool alone = found != NULL && found->value == NULL;

        if (strcmp(argv[i], "--help") == 0) {
            help(command, summary, option, options);
            return -1;
        }
        if (set || late || found != NULL) {
            if (!alone && i + 1 == argc)
                return cli_usage("%s: %s wants a value", command, argv[i]);
            i += !alone;
            if (set && out->sets == CLI_SET_MAX)
                return cli_usage("%s: more than %d times --set", command, CLI_SET_MAX);
            if (set)
                out->set[out->sets++] = argv[i];
            else if (late && limit != NULL)
                return cli_usage("%s: --time-limit is given twice", command);
            else if (late)
                limit = argv[i];
            else if (*found->place != NULL)
                return cli_usage("%s: %s is given twice", command, found->name);
            else
                *found->place = argv[i];
        } else if (argv[i][0] == '-' && argv[i][1] != '\0') {
            return cli_usage("%s: there is no option %s; twinhorizon %s --help lists them", command,
                             argv[i], command);
        } else if (out->case_path != NULL) {
            return cli_usage("%s: one case file is wanted, '%s' and '%s' are given", command,
                             out->case_path, argv[i]);
        } else {
            out->case_path = argv[i];
        }
    }
    if (out->case_path == NULL)
        return cli_usage("%s: a case file is wanted; twinhorizon %s --help tells more", command,
                         command);
    for (int i = 0; i < options; i++) {
        if (option[i].use == CLI_NEEDED && *option[i].place == NULL)
            return cli_usage("%s: %s %s is wanted", command, option[i].name, option[i].value);
        if (option[i].use >= CLI_FILE && *option[i].place != NULL)
            out->output[out->outputs++] = &option[i];
    }
    if (cli_check_outputs(command, out, false, &err) != TH_OK ||
        cli_limit_start(command, limit, out, &err) != TH_OK)
        return cli_failed(&err);
    return CLI_DONE;
}

th_status cli_whole(const char *command, const char *name, const char *text, int low, int high,
                    int fallback, int *out, th_error *err)
{
    double value;

    *out = fallback;
    if (text == NULL)
        return TH_OK;
    if (th_number_read(text, &value, NULL) != TH_OK || !(value >= low) || !(value <= high) ||
        value != floor(value))
        return high == INT_MAX
                   ? th_fail(err, TH_EINVAL, "%s: %s %s, want a whole number >= %d", command, name,
                             text, low)
                   : th_fail(err, TH_EINVAL, "%s: %s %s, want a whole number from %d to %d",
                             command, name, text, low, high);
    *out = (int)value;
    return TH_OK;
}

th_status cli_threads(const char *command, const char *text, int *out, th_error *err)
{
    const long processors = sysconf(_SC_NPROCESSORS_ONLN);
    const int one_each = processors > THREADS_MAX ? THREADS_MAX
                         : processors > 0         ? (int)processors
                                                  : 1;

    return cli_whole(command, "--threads", text, 1, THREADS_MAX, one_each, out, err);
}

th_status cli_read_case(const cli_arguments *arguments, th_case **out, th_error *err)
{
    th_status st = cli_check_input(arguments, arguments->case_path, err);

    if (st == TH_OK)
        st = th_case_read(arguments->case_path, arguments->set, arguments->sets, out, err);
    if (st == TH_OK && (*out)->data != NULL)
        st = cli_check_input(arguments, th_data_path((*out)->data), err);
    return st;
}
