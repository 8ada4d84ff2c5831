/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * How a figure is made: the script goes to gnuplot's standard input, the picture comes from its
 * standard output; file names stay with us. */
#include "figure.h"

#include <errno.h>
#include <fcntl.h>
#include <spawn.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

extern char **environ;

/* Colours that people with any kind of colour vision tell apart (from memory), dark enough for
 * paper; lines differ by dash and width as well. */
static const char *const style = "set encoding utf8\n"
                                 "set minussign\n"
                                 "set border lw 1 lc rgb '#333333'\n"
                                 "set tics nomirror\n"
                                 "set grid lc rgb '#dddddd' lw 0.7 dt 1\n"
                                 "set linetype 1 lc rgb '#0060a8' lw 2.2 dt 1 pt 7 ps 0.7\n"
                                 "set linetype 2 lc rgb '#d55e00' lw 2.2 dt '-' pt 5 ps 0.7\n"
                                 "set linetype 3 lc rgb '#007a5a' lw 2.2 dt '-.' pt 9 ps 0.8\n"
                                 "set linetype 4 lc rgb '#a0508a' lw 2.2 dt '..-' pt 13 ps 0.9\n"
                                 "set linetype 5 lc rgb '#111111' lw 2.2 dt '.' pt 4 ps 0.7\n"
                                 "set linetype 6 lc rgb '#3d9bd8' lw 2.2 dt '_-' pt 6 ps 0.7\n"
                                 "set linetype cycle 6\n";

th_status cli_figure_open(cli_figure *figure, int width, int height, th_error *err)
{
    *figure = (cli_figure){.width = width, .height = height};
    figure->out = open_memstream(&figure->text, &figure->length);
    if (figure->out == NULL)
        return th_fail(err, TH_ENOMEM, "figure: a script");
    fputs(style, figure->out);
    return TH_OK;
}

th_status cli_figure_close(cli_figure *figure, th_error *err)
{
    FILE *out = figure->out;
    const bool bad = ferror(out) != 0;

    figure->out = NULL;
    return fclose(out) == 0 && !bad ? TH_OK : th_fail(err, TH_ENOMEM, "figure: a script");
}

void cli_figure_clear(cli_figure *figure)
{
    if (figure->out != NULL)
        (void)fclose(figure->out);
    free(figure->text);
    *figure = (cli_figure){0};
}

/* ---- gnuplot -------------------------------------------------------------------------------- */

typedef enum { SVG, PDF, PNG, PAGE, KINDS } kind;

static void terminal(const cli_figure *f, kind which, FILE *to)
{
    const int w = f->width, h = f->height;

    if (which == SVG || which == PAGE)
        fprintf(to,
                "set terminal svg size %d,%d %s font 'sans-serif,14' background '#ffffff' "
                "linewidth 1 dashlength 1.2 noenhanced\n",
                w, h, which == PAGE ? "dynamic" : "fixed");
    else if (which == PDF)
        fprintf(to,
                "set terminal pdfcairo size %.3f,%.3f font 'sans,10.5' linewidth 0.8 dashlength "
                "0.9 noenhanced\n",
                w / 100.0, h / 100.0);
    else
        fprintf(to,
                "set terminal pngcairo size %d,%d font 'sans,20' linewidth 1.6 dashlength 1.2 "
                "noenhanced\n",
                2 * w, 2 * h);
}

static th_status refused(FILE *complaints, th_error *err)
{
    char line[256] = "";

    rewind(complaints);
    while (fgets(line, sizeof line, complaints) != NULL) /* the reason follows a copy of the line */
        if (strstr(line, "line ") != NULL)
            break;
    line[strcspn(line, "\n")] = '\0';
    return th_fail(err, TH_EBUG, "gnuplot did not draw the figure: %.200s", line);
}

/* Everything that a stream holds; NUL at the end. */
static char *slurp(int fd, size_t *length)
{
    char *all = NULL;
    size_t room = 0;

    for (*length = 0;;) {
        ssize_t got;

        if (*length + 1 >= room) {
            char *more = realloc(all, room = room == 0 ? 65536 : 2 * room);

            if (more == NULL) {
                free(all);
                return NULL;
            }
            all = more;
        }
        got = read(fd, all + *length, room - *length - 1);
        if (got < 0 && errno == EINTR)
            continue;
        if (got <= 0)
            break;
        *length += (size_t)got;
    }
    all[*length] = '\0';
    return all;
}

/* Run gnuplot on a script; *picture is freed by the caller. */
static th_status draw(const cli_figure *figure, kind which, char **picture, size_t *length,
                      th_error *err)
{
    char name[] = "gnuplot", no_settings[] = "-d", standard[] = "-";
    char *const argument[] = {name, no_settings, standard, NULL};
    FILE *script = tmpfile(), *complaints = tmpfile();
    posix_spawn_file_actions_t actions;
    int ends[2] = {-1, -1}, status = 0, trouble;
    pid_t child = -1;
    th_status st = TH_EBUG;

    *picture = NULL;
    if (script == NULL || complaints == NULL || pipe(ends) != 0) {
        st = th_fail(err, TH_EIO, "figure: no temporary file or pipe (%s)", strerror(errno));
        goto done;
    }
    terminal(figure, which, script);
    if (fwrite(figure->text, 1, figure->length, script) != figure->length || fflush(script) != 0 ||
        lseek(fileno(script), 0, SEEK_SET) != 0) {
        st = th_fail(err, TH_EIO, "figure: the script cannot be written (%s)", strerror(errno));
        goto done;
    }
    (void)posix_spawn_file_actions_init(&actions);
    (void)posix_spawn_file_actions_adddup2(&actions, fileno(script), STDIN_FILENO);
    (void)posix_spawn_file_actions_adddup2(&actions, ends[1], STDOUT_FILENO);
    (void)posix_spawn_file_actions_adddup2(&actions, fileno(complaints), STDERR_FILENO);
    (void)posix_spawn_file_actions_addclose(&actions, ends[0]);
    (void)posix_spawn_file_actions_addclose(&actions, ends[1]);
    trouble = posix_spawnp(&child, name, &actions, NULL, argument, environ);
    (void)posix_spawn_file_actions_destroy(&actions);
    (void)close(ends[1]);
    ends[1] = -1;
    if (trouble != 0) {
        st = th_fail(err, TH_EIO, "figures are drawn by gnuplot, and it cannot be started (%s)",
                     strerror(trouble));
        goto done;
    }
    *picture = slurp(ends[0], length);
    while (waitpid(child, &status, 0) < 0 && errno == EINTR)
        continue;
    if (*picture == NULL)
        st = th_fail(err, TH_ENOMEM, "figure: a picture");
    else if (WIFEXITED(status) && WEXITSTATUS(status) == 127)
        st = th_fail(err, TH_EIO, "figures are drawn by gnuplot, and it is not there");
    else if (!WIFEXITED(status) || WEXITSTATUS(status) != 0 || *length == 0)
        st = refused(complaints, err);
    else
        st = TH_OK;
done:
    if (st != TH_OK) {
        free(*picture);
        *picture = NULL;
    }
    for (int i = 0; i < 2; i++)
        if (ends[i] >= 0)
            (void)close(ends[i]);
    if (script != NULL)
        (void)fclose(script);
    if (complaints != NULL)
        (void)fclose(complaints);
    return st;
}

/* ---- SVG without scripts -------------------------------------------------------------------- */

/* Take out everything from `begin` to and with `end`, wherever it stands. */
static void strike(char *text, const char *begin, const char *end)
{
    char *from = text, *to = text, *start;

    while ((start = strstr(from, begin)) != NULL) {
        char *stop = strstr(start, end);
        const size_t kept = (size_t)(start - from);

        if (stop == NULL)
            break;
        memmove(to, from, kept);
        to += kept;
        from = stop + strlen(end);
    }
    memmove(to, from, strlen(from) + 1);
}

/* Texts that gnuplot shows by a script under the pointer become titles, which viewers show by
 * themselves: <g onmousemove="gnuplot_svg.showHypertext(evt,'TEXT')" onmouseout="..."><title> ...
 */
static void hover(char *svg)
{
    static const char begin[] = "<g onmousemove=\"gnuplot_svg.showHypertext(evt,'";
    static const char middle[] = "')\" onmouseout=\"gnuplot_svg.hideHypertext()\"><title> </title>";
    char *from = svg, *to = svg, *start;

    while ((start = strstr(from, begin)) != NULL) {
        char *text = start + sizeof begin - 1, *stop = strstr(text, middle);
        const size_t kept = (size_t)(start - from),
                     length = stop != NULL ? (size_t)(stop - text) : 0;

        if (stop == NULL)
            break;
        memmove(to, from, kept);
        to += kept;
        memcpy(to, "<g><title>", 10); /* shorter than what it replaces */
        to += 10;
        memmove(to, text, length);
        to += length;
        memcpy(to, "</title>", 8);
        to += 8;
        from = stop + sizeof middle - 1;
    }
    memmove(to, from, strlen(from) + 1);
}

static void clean(char *svg)
{
    hover(svg);
    strike(svg, "<script", "</script>");
    strike(svg, "<script", "/>");
    strike(svg, " onload=\"", "\"");
    strike(svg, " onclick=\"", "\"");
}

th_status cli_figure_svg(const cli_figure *figure, char **svg, th_error *err)
{
    size_t length = 0;
    char *start;
    th_status st = draw(figure, PAGE, svg, &length, err);

    if (st != TH_OK)
        return st;
    clean(*svg);
    start = strstr(*svg, "<svg");
    if (start == NULL) {
        free(*svg);
        *svg = NULL;
        return th_fail(err, TH_EBUG, "gnuplot made no SVG");
    }
    memmove(*svg, start, strlen(start) + 1);
    return TH_OK;
}

/* ---- files ---------------------------------------------------------------------------------- */

static kind kind_of(const char *path)
{
    static const char *const ending[] = {".svg", ".pdf", ".png"};
    const size_t length = strlen(path);

    for (int i = 0; i < 3; i++)
        if (length > 4 && strcmp(path + length - 4, ending[i]) == 0)
            return (kind)i;
    return KINDS;
}

th_status cli_figure_check(const char *command, const char *option, const char *path, th_error *err)
{
    if (path == NULL || kind_of(path) != KINDS)
        return TH_OK;
    return th_fail(err, TH_EINVAL, "%s: %s %s: the name must end in .svg, .pdf or .png", command,
                   option, path);
}

th_status cli_script_check(const char *command, const char *script, bool figure, th_error *err)
{
    if (script == NULL || figure)
        return TH_OK;
    return th_fail(err, TH_EINVAL, "%s: --script %s goes with --figure", command, script);
}

static th_status save(const char *path, const char *bytes, size_t length, th_error *err)
{
    cli_file file = {0};
    th_status st = cli_file_open(path, &file, err);

    if (st == TH_OK && fwrite(bytes, 1, length, file.stream) != length)
        st = th_fail(err, TH_EIO, "%s: cannot be written (%s)", path, strerror(errno));
    if (st == TH_OK)
        st = cli_file_finish(&file, err);
    cli_file_abandon(&file);
    return st;
}

static th_status save_script(const cli_figure *figure, kind which, const char *path, th_error *err)
{
    cli_file file = {0};
    th_status st = cli_file_open(path, &file, err);

    if (st == TH_OK) {
        fputs("# A figure of twinhorizon with its data, for gnuplot 5.4. To draw it:\n"
              "#   gnuplot THIS_FILE > PICTURE\n",
              file.stream);
        terminal(figure, which, file.stream);
        if (fwrite(figure->text, 1, figure->length, file.stream) != figure->length)
            st = th_fail(err, TH_EIO, "%s: cannot be written (%s)", path, strerror(errno));
    }
    if (st == TH_OK)
        st = cli_file_finish(&file, err);
    cli_file_abandon(&file);
    return st;
}

th_status cli_figure_save(const cli_figure *figure, const char *path, const char *script,
                          th_error *err)
{
    const kind which = kind_of(path);
    char *picture = NULL;
    size_t length = 0;
    th_status st = draw(figure, which, &picture, &length, err);

    if (st == TH_OK && which == SVG) {
        clean(picture);
        length = strlen(picture);
    }
    if (st == TH_OK)
        st = save(path, picture, length, err);
    if (st == TH_OK && script != NULL)
        st = save_script(figure, which, script, err);
    free(picture);
    return st;
}
