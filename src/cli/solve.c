/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * twinhorizon solve CASE: verdict, flow and modes as text, modes as a table, their shapes and the
 * matrix as files.
 * A new column of the table is one line of `column` and one put in put_mode. */
#include <gsl/gsl_math.h>
#include <string.h>

#include "figure.h"

/* "matrix, matching function, census and index agree": who stands behind the counts. */
static void print_agreement(const th_solution *s)
{
    const char *name[4] = {"matrix", "matching function"};
    int count = 2;

    if (s->census_known)
        name[count++] = "census";
    if (s->index_known)
        name[count++] = "index";
    for (int i = 0; i < count; i++)
        printf("%s%s", i == 0 ? "" : i + 1 < count ? ", " : " and ", name[i]);
    fputs(" agree", stdout);
    if (!s->index_known)
        fputs(" (a supersonic end has no static index)", stdout);
}

/* The answer in one sentence, then the fastest mode. */
static void print_verdict(const cli_view *v, const th_solution *s)
{
    char growth[CLI_NUMBER], frequency[CLI_NUMBER];

    if (s->verdict == TH_VERDICT_UNDECIDED) {
        printf("Undecided: %s.\n", s->reason);
    } else {
        if (s->unstable == 0)
            fputs("Stable: no unstable mode; ", stdout);
        else
            printf("%d unstable %s; ", s->unstable, s->unstable == 1 ? "mode" : "modes");
        print_agreement(s);
        if (s->unstable > 0)
            printf("; largest disagreement %.0e%s", s->disagreement * v->rate, v->per_second);
        puts(".");
    }
    if (s->unstable == 0)
        return;
    printf("The fastest grows by e in %.5g%s (%s%s) at %s%s.\n", v->time / s->mode[0].omega_im,
           v->milliseconds,
           cli_number(s->mode[0].omega_im * v->rate, s->mode[0].omega_error * v->rate, growth),
           v->per_second,
           cli_number(s->mode[0].omega_re * v->frequency, s->mode[0].omega_error * v->frequency,
                      frequency),
           v->si ? v->hertz : " of frequency");
}

static void print_modes(const cli_view *v, const th_solution *s)
{
    if (s->count == 0) {
        puts("\nModes       none in the band");
        return;
    }
    printf("\n%4s  %-9s %16s %16s %8s %8s %10s %4s %6s %5s %9s  %s\n", "mode", "label",
           v->si ? "frequency/Hz" : "frequency", v->si ? "growth*s" : "growth rate",
           v->si ? "+-*s" : "+-", "shift", v->si ? "e-fold/ms" : "e-fold", "norm", "pocket",
           "nodes", "condition", "confirmed by");
    for (int i = 0; i < s->count; i++) {
        const th_mode *m = &s->mode[i];
        char frequency[CLI_NUMBER], growth[CLI_NUMBER], time[CLI_NUMBER] = "-";
        char confirmed[TH_CONFIRMED_SIZE];

        if (m->label == TH_LABEL_UNSTABLE)
            (void)snprintf(time, sizeof time, "%.5g", v->time / m->omega_im);
        th_confirmed_text(m->confirmed, confirmed);
        printf("%4d  %-9s %16s %16s %8.1e %8.1e %10s %4s %5.0f%% %5d %9.3g  %s\n", i + 1,
               th_label_text(m->label),
               cli_number(m->omega_re * v->frequency, m->omega_error * v->frequency, frequency),
               cli_number(m->omega_im * v->rate, m->omega_error * v->rate, growth),
               m->omega_error * v->rate, m->shift * v->rate, time,
               m->norm < 0   ? "-"
               : m->norm > 0 ? "+"
                             : "0",
               100.0 * m->pocket_share, m->nodes, m->condition, confirmed);
    }
}

static void print_notes(const cli_view *v, const th_flow *flow, const th_solution *s)
{
    const bool open = th_flow_ends(flow).kind == TH_ENDS_OPEN;

    if (s->count > 0)
        puts("            shift: how far the matrix's value lies from the matching function's, "
             "which is shown");
    printf("\nCounts      growing modes: %d found", s->unstable);
    if (s->census_known)
        printf(", %d by census", s->census);
    if (s->index_known)
        printf(open ? ", %d by static index" : "; static index %d", s->index);
    if (!open)
        printf(" = growing + 2 x %d neutral of negative energy", s->negative);
    printf("; both signs of the frequency counted\n");
    if (s->census_known)
        printf(
            "Certified   frequency up to %.4g%s, growth rate up to %.4g%s; worst phase step %.2f\n",
            s->census_re_max * v->frequency, v->hertz, s->census_im_max * v->rate, v->per_second,
            s->census_step);
    printf("Listed      %s%.5g%s%s; each stands for its mirror image -omega* too%s\n",
           s->dense ? "modes up to frequency " : "growing modes only; band up to frequency ",
           s->omega_top * v->frequency, v->hertz,
           open ? "" : ", beyond it growing ones and those of negative energy",
           open ? "" : ", growing ones for decaying partners");
    printf("Matrix      %d unknowns%s\n", s->unknowns,
           s->dense ? ""
                    : ": too many for all eigenvalues; asked for the one next to each mode of "
                      "the census");
    if (s->zero_modes > 0)
        printf("Note        %d zero modes of the ring (the free phase and its partner) recognised "
               "and set aside\n",
               s->zero_modes);
    if (s->absorbing)
        puts("Note        an end is supersonic: in the matrix it carries an absorbing layer");
}

static void put_mode(th_table *table, const th_case *c, int number, const th_mode *m,
                     const cli_data_errors *errors)
{
    const double rate = th_scale_factor(&c->scale, TH_DIM_RATE);
    char confirmed[TH_CONFIRMED_SIZE];

    th_confirmed_text(m->confirmed, confirmed);
    th_table_put_integer(table, number);
    th_table_put_text(table, th_label_text(m->label));
    th_table_put_exact(table, m->omega_re * rate);
    th_table_put_exact(table, m->omega_im * rate);
    th_table_put_number(table, m->omega_error * rate);
    th_table_put_integer(table, m->norm);
    th_table_put_number(table, m->pocket_share);
    th_table_put_integer(table, m->nodes);
    th_table_put_number(table, m->condition);
    th_table_put_number(table, m->residual);
    th_table_put_text(table, confirmed);
    if (errors->sigma_known && number <= errors->count) {
        th_table_put_number(table, errors->sigma[number - 1].re * rate);
        th_table_put_number(table, errors->sigma[number - 1].im * rate);
    } else if (errors->known) {
        th_table_put_nothing(table);
        th_table_put_nothing(table);
    }
}

static th_status write_table(const th_case *c, const th_solution *s, const cli_data_errors *errors,
                             const char *path, th_error *err)
{
    const char *rate = cli_unit(c, TH_DIM_RATE);
    const th_column column[] = {
        {.name = "mode", .title = "number, by growth rate", .datatype = "integer"},
        {.name = "label",
         .title = "kind of mode",
         .datatype = "string",
         .format = "unstable|trapped|stable|undecided"},
        {.name = "omega_re", .title = "angular frequency", .unit = rate, .datatype = "number"},
        {.name = "omega_im", .title = "growth rate", .unit = rate, .datatype = "number"},
        {.name = "omega_error",
         .title = "error bar of the complex frequency",
         .unit = rate,
         .datatype = "number"},
        {.name = "norm",
         .title = "sign of the norm",
         .datatype = "integer",
         .description = "1 ordinary, -1 negative energy at positive frequency, 0 growing"},
        {.name = "pocket_share",
         .title = "share of the pockets in the comoving energy",
         .datatype = "number"},
        {.name = "nodes",
         .title = "zeros of the density fluctuation in the pockets",
         .datatype = "integer"},
        {.name = "condition", .title = "condition number of the eigenvalue", .datatype = "number"},
        {.name = "residual",
         .title = "residual of the eigenpair over the norm of the matrix",
         .datatype = "number"},
        {.name = "confirmed",
         .title = "computations that agree",
         .datatype = "string",
         .description = "names joined by +"},
        {.name = "data_error_re",
         .title = "standard deviation of the angular frequency from the errors of the table",
         .unit = rate,
         .datatype = "number"},
        {.name = "data_error_im",
         .title = "standard deviation of the growth rate from the errors of the table",
         .unit = rate,
         .datatype = "number"},
    };
    enum { all = sizeof column / sizeof column[0], of_data = 2 };
    th_table *table = NULL;
    th_status st = cli_table(path, column, errors->known ? all : all - of_data,
                             "modes of one configuration, fastest growing first", c, &table, err);

    for (int i = 0; st == TH_OK && i < s->count; i++) {
        put_mode(table, c, i + 1, &s->mode[i], errors);
        st = th_table_end_row(table, err);
    }
    if (st == TH_OK)
        st = th_table_finish(table, err);
    th_table_destroy(table);
    return st;
}

static th_status write_matrix(const th_case *c, const th_flow *flow, const char *path,
                              th_error *err)
{
    const th_solve_options options = {.accuracy = c->accuracy};
    cli_file file = {0};
    th_error why;
    th_status st = cli_file_open(path, &file, err);

    if (st == TH_OK) {
        st = th_matrix_write(flow, &options, c->setup.shape->name, file.stream, &why);
        if (st != TH_OK)
            st = th_fail(err, st, "%s: %s", path, why.text);
    }
    if (st == TH_OK)
        st = cli_file_finish(&file, err);
    cli_file_abandon(&file);
    return st;
}

static th_status draw_spectrum(const th_case *c, const th_solution *s, const char *path,
                               const char *script, th_error *err)
{
    cli_figure figure = {0};
    th_status st = cli_draw_spectrum(c, s, &figure, err);

    if (st == TH_OK)
        st = cli_figure_save(&figure, path, script, err);
    cli_figure_clear(&figure);
    return st;
}

static th_status draw_modes(const th_case *c, const th_flow *flow, const th_solution *s,
                            const char *path, th_error *err)
{
    cli_figure figure = {0};
    th_status st = cli_draw_modes(c, flow, s, &figure, err);

    if (st == TH_OK)
        st = cli_figure_save(&figure, path, NULL, err);
    cli_figure_clear(&figure);
    return st;
}

static void print_all(const th_case *c, const th_flow *flow, const th_solution *s)
{
    const cli_view v = cli_view_of(c);

    print_verdict(&v, s);
    putchar('\n');
    cli_print_flow(stdout, c, flow, false);
    print_modes(&v, s);
    print_notes(&v, flow, s);
}

int cli_solve(int argc, char **argv)
{
    const char *csv = NULL, *modes = NULL, *matrix = NULL, *sensitivity = NULL;
    const char *picture = NULL, *shapes = NULL, *script = NULL;
    const cli_option option[] = {
        {"--csv", "FILE", "table of the modes; - for standard output", &csv, CLI_TABLE},
        {"--modes", "FILE.h5", "shapes of the modes along the flow, HDF5", &modes, CLI_FILE},
        {"--matrix", "FILE.mtx",
         "the matrix A in Matrix Market form; omega = i eigenvalue, "
         "reduced units",
         &matrix, CLI_FILE},
        CLI_FIGURE_OPTIONS(picture, script, CLI_FILE),
        {"--figure-modes", "FILE", "figure of the shapes of the first modes", &shapes, CLI_FILE},
        {"--sensitivity", NULL, "also print d omega/d key of every growing mode", &sensitivity,
         CLI_PLAIN},
    };
    cli_arguments arguments;
    th_case *c = NULL;
    th_flow *flow = NULL;
    th_solution *s = NULL;
    cli_data_errors errors = {0};
    th_error err = {0};
    th_status st;
    bool only_table;
    int code =
        cli_read("solve", "Find the modes of one configuration and say whether it is stable.", argc,
                 argv, option, sizeof option / sizeof option[0], &arguments);

    if (code != CLI_DONE)
        return code < 0 ? CLI_DONE : code;
    only_table = csv != NULL && strcmp(csv, "-") == 0;
    if (only_table && sensitivity != NULL)
        return cli_usage("solve: --csv - leaves no room on standard output for --sensitivity");
    st = cli_figure_check("solve", "--figure", picture, &err);
    if (st == TH_OK)
        st = cli_figure_check("solve", "--figure-modes", shapes, &err);
    if (st == TH_OK)
        st = cli_script_check("solve", script, picture != NULL, &err);
    if (st == TH_OK)
        st = cli_read_case(&arguments, &c, &err);
    if (st == TH_OK)
        st = th_flow_build(&c->setup, &flow, &err);
    if (st == TH_OK && matrix != NULL)
        st = write_matrix(c, flow, matrix, &err);
    if (st == TH_OK)
        st = th_solve(flow, &(th_solve_options){.accuracy = c->accuracy}, &s, &err);
    if (st == TH_OK)
        st = cli_data_errors_find(c, flow, s, &errors, &err);
    if (st == TH_OK && csv != NULL)
        st = write_table(c, s, &errors, csv, &err);
    if (st == TH_OK && modes != NULL)
        st = cli_modes_write(c, flow, s, modes, &err);
    if (st == TH_OK && picture != NULL)
        st = draw_spectrum(c, s, picture, script, &err);
    if (st == TH_OK && shapes != NULL)
        st = draw_modes(c, flow, s, shapes, &err);
    if (st == TH_OK && !only_table)
        print_all(c, flow, s);
    if (st == TH_OK && !only_table) {
        cli_data_errors_print(c, s, &errors);
        st = cli_print_remarks(c, flow, s, &err);
    }
    if (st == TH_OK && sensitivity != NULL)
        st = cli_print_sensitivity(c, s, &err);
    if (st != TH_OK)
        code = cli_failed(&err);
    else if (s->verdict == TH_VERDICT_UNDECIDED)
        code = CLI_UNDECIDED;
    cli_data_errors_clear(&errors);
    th_solution_destroy(s);
    th_flow_destroy(flow);
    th_case_destroy(c);
    return code;
}
