/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * solve --modes: the shapes of all modes as an HDF5 file. In: case, flow, solution. Out: the file.
 * Calls flow, profile, output.c.
 *
 * Datasets, M modes as listed by solve, N = 2001 positions evenly over the window of the flow:
 *     mode, label, omega_re, omega_im, omega_error  [M]
 *     x, density, speed, sound                      [N]  at a jump of the flow the right side
 *     eta_re, eta_im, phi_re, phi_im, u_re, u_im, v_re, v_im  [M, N]  as in profile.h
 *     legend, case_text                             what the attributes say, for readers that see
 *                                                   datasets only
 * Each number has the attributes title, unit (SI, or 1) and dimensions; x and mode are dimension
 * scales. The file has title, version and case. The same case gives the same bytes.
 *
 * HDF5 builds the file in memory, so that one place (output.c) opens, names and refuses files.
 * A new dataset is one more put in put_all. Proof: tests/check_modes_file.py. */
#include <hdf5.h>
#include <hdf5_hl.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>
#include <twinhorizon/profile.h>
#include <twinhorizon/version.h>

#include "cli.h"

enum { POSITIONS = 2001 };
enum { LEGEND_LINES = 24, LEGEND_WIDTH = 160 }; /* 17 datasets; the longest line takes 110 bytes */
enum { LABEL_WIDTH = 9 };                       /* bytes of "undecided", the longest label */

/* All numbers in output units; [modes][POSITIONS] in one block for each field. */
typedef struct {
    int modes;
    int *number;
    char (*label)[LABEL_WIDTH]; /* padded with zeros */
    double *omega_re, *omega_im, *omega_error;
    double x[POSITIONS], density[POSITIONS], speed[POSITIONS], sound[POSITIONS];
    double *eta_re, *eta_im, *phi_re, *phi_im, *u_re, *u_im, *v_re, *v_im;
} shapes;

/* The HDF5 side: what is open, and whether HDF5 refused anything so far. */
typedef struct {
    hid_t file, creation; /* creation: properties of datasets */
    hid_t x, mode;        /* the dimension scales */
    char legend[LEGEND_LINES][LEGEND_WIDTH];
    int lines;
    bool refused;
} writer;

typedef enum { ALONG_X, ALONG_MODES, ALONG_BOTH } axes;

static const char *const dimensions[] = {
    [ALONG_X] = "x", [ALONG_MODES] = "mode", [ALONG_BOTH] = "mode, x"};

/* ---- numbers -------------------------------------------------------------------------------- */

static void shapes_clear(shapes *s)
{
    free(s->number);
    free(s->label);
    free(s->omega_re); /* the block with all others */
}

static th_status shapes_create(int modes, shapes *s, th_error *err)
{
    const size_t count = (size_t)modes, field = count * POSITIONS;
    double **const part[] = {&s->eta_re, &s->eta_im, &s->phi_re, &s->phi_im,
                             &s->u_re,   &s->u_im,   &s->v_re,   &s->v_im};
    double *block;

    s->modes = modes;
    s->number = calloc(count + 1, sizeof *s->number);
    s->label = calloc(count + 1, sizeof *s->label);
    block = calloc(3 * count + 8 * field + 1, sizeof *block);
    s->omega_re = block;
    if (s->number == NULL || s->label == NULL || block == NULL)
        return th_fail(err, TH_ENOMEM, "solve: the shapes of %d modes", modes);
    s->omega_im = block + count;
    s->omega_error = block + 2 * count;
    for (int i = 0; i < 8; i++)
        *part[i] = block + 3 * count + (size_t)i * field;
    return TH_OK;
}

/* Factor of densities: reduced, or in SI without a density relative to the upstream one. */
static double density_factor(const th_case *c)
{
    return c->density_given ? th_scale_factor(&c->scale, TH_DIM_LINE_DENSITY) : 1.0;
}

/* Shape of mode i on the positions `reduced`. */
static th_status fill_mode(const th_case *c, const th_flow *flow, const th_mode *mode, int i,
                           const double *reduced, shapes *s, th_error *err)
{
    const th_solve_options options = {.accuracy = c->accuracy};
    const double rate = th_scale_factor(&c->scale, TH_DIM_RATE);
    const char *label = th_label_text(mode->label);
    const size_t first = (size_t)i * POSITIONS;
    th_status st = th_mode_profile(flow, &options, mode->omega_re, mode->omega_im, POSITIONS,
                                   reduced, s->eta_re + first, s->eta_im + first, s->phi_re + first,
                                   s->phi_im + first, err);

    if (st != TH_OK)
        return st;
    s->number[i] = i + 1;
    memcpy(s->label[i], label, strnlen(label, LABEL_WIDTH));
    s->omega_re[i] = mode->omega_re * rate;
    s->omega_im[i] = mode->omega_im * rate;
    s->omega_error[i] = mode->omega_error * rate;
    for (size_t j = 0, at = first; j < POSITIONS; j++, at++) {
        const double root = sqrt(s->density[j]);

        /* u = sqrt(n) (eta/2 + i phi), v = sqrt(n) (eta/2 - i phi) */
        s->u_re[at] = root * (0.5 * s->eta_re[at] - s->phi_im[at]);
        s->u_im[at] = root * (0.5 * s->eta_im[at] + s->phi_re[at]);
        s->v_re[at] = root * (0.5 * s->eta_re[at] + s->phi_im[at]);
        s->v_im[at] = root * (0.5 * s->eta_im[at] - s->phi_re[at]);
    }
    return TH_OK;
}

static th_status fill(const th_case *c, const th_flow *flow, const th_solution *solution, shapes *s,
                      th_error *err)
{
    const double length = th_scale_factor(&c->scale, TH_DIM_LENGTH);
    const double speed = th_scale_factor(&c->scale, TH_DIM_SPEED);
    double reduced[POSITIONS], from, to;
    th_status st = TH_OK;

    cli_window(flow, &from, &to);
    for (int j = 0; j < POSITIONS; j++) {
        const double share = (double)j / (POSITIONS - 1);
        th_flow_point p;

        reduced[j] = (1.0 - share) * from + share * to; /* mirror images stay mirror images */
        th_flow_at(flow, reduced[j], &p);
        s->x[j] = reduced[j] * length;
        s->density[j] = p.n * density_factor(c);
        s->speed[j] = p.v * speed;
        s->sound[j] = p.c * speed;
    }
    for (int i = 0; st == TH_OK && i < s->modes; i++)
        st = fill_mode(c, flow, &solution->mode[i], i, reduced, s, err);
    return st;
}

/* ---- HDF5 ----------------------------------------------------------------------------------- */

/* A type that holds strings: UTF-8 of size H5T_VARIABLE in attributes; in datasets bytes padded
 * with zeros, called ASCII because Octave reads no other character set (a case may hold UTF-8). */
static hid_t string_type(size_t size)
{
    const hid_t type = H5Tcopy(H5T_C_S1);

    if (H5Tset_size(type, size) < 0 ||
        (size == H5T_VARIABLE ? H5Tset_cset(type, H5T_CSET_UTF8) < 0
                              : H5Tset_strpad(type, H5T_STR_NULLPAD) < 0)) {
        (void)H5Tclose(type);
        return H5I_INVALID_HID;
    }
    return type;
}

static void put_attribute(writer *w, hid_t object, const char *name, const char *text)
{
    const hid_t type = string_type(H5T_VARIABLE), space = H5Screate(H5S_SCALAR);
    const hid_t at = H5Acreate2(object, name, type, space, H5P_DEFAULT, H5P_DEFAULT);

    w->refused = w->refused || at < 0 || H5Awrite(at, type, &text) < 0;
    (void)H5Aclose(at);
    (void)H5Sclose(space);
    (void)H5Tclose(type);
}

/* A dataset of rank <= 2, left open. */
static hid_t put_data(writer *w, const char *name, hid_t stored, hid_t held, int rank,
                      const hsize_t *extent, const void *data)
{
    const hid_t space = rank > 0 ? H5Screate_simple(rank, extent, NULL) : H5Screate(H5S_SCALAR);
    const hid_t set =
        H5Dcreate2(w->file, name, stored, space, H5P_DEFAULT, w->creation, H5P_DEFAULT);

    w->refused =
        w->refused || set < 0 || H5Dwrite(set, held, H5S_ALL, H5S_ALL, H5P_DEFAULT, data) < 0;
    (void)H5Sclose(space);
    return set;
}

/* Title, unit, axes; a legend line with the same. */
static void describe(writer *w, hid_t set, const char *name, axes along, const char *unit,
                     const char *title)
{
    put_attribute(w, set, "title", title);
    put_attribute(w, set, "unit", unit);
    put_attribute(w, set, "dimensions", dimensions[along]);
    (void)snprintf(w->legend[w->lines++], LEGEND_WIDTH, "%s [%s], unit %s: %s", name,
                   dimensions[along], unit, title);
}

static void attach(writer *w, hid_t set, hid_t scale, unsigned axis, const char *name)
{
    if (set != scale)
        w->refused = w->refused || H5DSattach_scale(set, scale, axis) < 0 ||
                     H5DSset_label(set, axis, name) < 0;
    else
        w->refused = w->refused || H5DSset_scale(set, name) < 0;
}

/* A dataset of numbers or labels on its axes; x and mode must come first. Returns it, open. */
static hid_t put(writer *w, const shapes *s, const char *name, hid_t stored, hid_t held, axes along,
                 const void *data, const char *unit, const char *title)
{
    const hsize_t both[2] = {(hsize_t)s->modes, POSITIONS};
    const hid_t set = put_data(w, name, stored, held, along == ALONG_BOTH ? 2 : 1,
                               along == ALONG_X ? both + 1 : both, data);

    if (w->x < 0 && along == ALONG_X)
        w->x = set;
    if (w->mode < 0 && along == ALONG_MODES)
        w->mode = set;
    describe(w, set, name, along, unit, title);
    if (along != ALONG_X)
        attach(w, set, w->mode, 0, "mode");
    if (along != ALONG_MODES)
        attach(w, set, w->x, along == ALONG_BOTH, "x");
    return set;
}

static void put_numbers(writer *w, const shapes *s, const char *name, axes along,
                        const double *value, const char *unit, const char *title)
{
    const hid_t set = put(w, s, name, H5T_IEEE_F64LE, H5T_NATIVE_DOUBLE, along, value, unit, title);

    if (set != w->x)
        (void)H5Dclose(set);
}

static void put_text(writer *w, const char *name, int rank, hsize_t count, size_t size,
                     const void *data)
{
    const hid_t type = string_type(size);

    (void)H5Dclose(put_data(w, name, type, type, rank, &count, data));
    (void)H5Tclose(type);
}

static void put_labels(writer *w, const shapes *s)
{
    const hid_t type = string_type(LABEL_WIDTH);

    (void)H5Dclose(put(w, s, "label", type, type, ALONG_MODES, s->label, "1", "kind of mode"));
    (void)H5Tclose(type);
}

static const char *unit_of(const th_case *c, th_dimension dimension)
{
    const char *unit = cli_unit(c, dimension);

    return unit != NULL ? unit : th_dimension_unit(TH_DIM_NUMBER);
}

static void put_all(writer *w, const th_case *c, const shapes *s)
{
    const char *one = th_dimension_unit(TH_DIM_NUMBER), *rate = unit_of(c, TH_DIM_RATE);
    const char *speed = unit_of(c, TH_DIM_SPEED);
    const bool si = c->scale.system == TH_SYSTEM_SI, relative = si && !c->density_given;
    const char *root = si && !relative ? "m^(-1/2)" : one;

    put_numbers(w, s, "x", ALONG_X, s->x, unit_of(c, TH_DIM_LENGTH), "position along the flow");
    w->mode = put(w, s, "mode", H5T_STD_I32LE, H5T_NATIVE_INT, ALONG_MODES, s->number, one,
                  "number, by growth rate");
    put_labels(w, s);
    put_numbers(w, s, "omega_re", ALONG_MODES, s->omega_re, rate, "angular frequency");
    put_numbers(w, s, "omega_im", ALONG_MODES, s->omega_im, rate,
                "growth rate: everything goes as exp(-i omega t)");
    put_numbers(w, s, "omega_error", ALONG_MODES, s->omega_error, rate,
                "error bar of the complex frequency");
    put_numbers(w, s, "density", ALONG_X, s->density,
                relative ? one : unit_of(c, TH_DIM_LINE_DENSITY),
                relative ? "line density over upstream density" : "line density");
    put_numbers(w, s, "speed", ALONG_X, s->speed, speed, "flow speed");
    put_numbers(w, s, "sound", ALONG_X, s->sound, speed, "local sound speed");
    put_numbers(w, s, "eta_re", ALONG_BOTH, s->eta_re, one,
                "relative density fluctuation eta, real part; largest |eta| is 1");
    put_numbers(w, s, "eta_im", ALONG_BOTH, s->eta_im, one, "the same, imaginary part");
    put_numbers(w, s, "phi_re", ALONG_BOTH, s->phi_re, one,
                "phase fluctuation phi in radians, real part");
    put_numbers(w, s, "phi_im", ALONG_BOTH, s->phi_im, one, "the same, imaginary part");
    put_numbers(w, s, "u_re", ALONG_BOTH, s->u_re, root,
                "Bogoliubov amplitude u = sqrt(density) (eta/2 + i phi), real part");
    put_numbers(w, s, "u_im", ALONG_BOTH, s->u_im, root, "the same, imaginary part");
    put_numbers(w, s, "v_re", ALONG_BOTH, s->v_re, root,
                "Bogoliubov amplitude v = sqrt(density) (eta/2 - i phi), real part");
    put_numbers(w, s, "v_im", ALONG_BOTH, s->v_im, root, "the same, imaginary part");
    put_text(w, "legend", 1, (hsize_t)w->lines, LEGEND_WIDTH, w->legend);
    put_text(w, "case_text", 0, 1, strlen(c->text) + 1, c->text);
    put_attribute(w, w->file, "title", "shapes of the modes of one configuration");
    put_attribute(w, w->file, "version", th_version());
    put_attribute(w, w->file, "case", c->text);
}

static void writer_open(writer *w)
{
    const size_t grow = 1 << 20; /* bytes; the block of memory grows by this */
    const hid_t access = H5Pcreate(H5P_FILE_ACCESS), root = H5Pcreate(H5P_FILE_CREATE);

    w->file = w->x = w->mode = H5I_INVALID_HID;
    w->creation = H5Pcreate(H5P_DATASET_CREATE);
    w->refused = H5Pset_fapl_core(access, grow, 0) < 0 || H5Pset_obj_track_times(root, 0) < 0 ||
                 H5Pset_obj_track_times(w->creation, 0) < 0;
    w->file = H5Fcreate("modes.h5", H5F_ACC_TRUNC, root, access); /* a name, no file */
    w->refused = w->refused || w->file < 0;
    (void)H5Pclose(root);
    (void)H5Pclose(access);
}

static void writer_close(writer *w)
{
    (void)H5Dclose(w->mode);
    (void)H5Dclose(w->x);
    (void)H5Fclose(w->file);
    (void)H5Pclose(w->creation);
}

/* The whole file as bytes, which the caller frees; NULL when HDF5 has refused something. */
static void *image_of(writer *w, size_t *size)
{
    void *image = NULL;
    ssize_t bytes;

    if (w->refused || H5Fflush(w->file, H5F_SCOPE_GLOBAL) < 0)
        return NULL;
    bytes = H5Fget_file_image(w->file, NULL, 0);
    if (bytes > 0)
        image = malloc((size_t)bytes);
    if (image != NULL && H5Fget_file_image(w->file, image, (size_t)bytes) != bytes) {
        free(image);
        image = NULL;
    }
    *size = image != NULL ? (size_t)bytes : 0;
    return image;
}

th_status cli_modes_write(const th_case *c, const th_flow *flow, const th_solution *s,
                          const char *path, th_error *err)
{
    th_status st = TH_EBUG;
    cli_file file = {0};
    writer *w = calloc(1, sizeof *w);
    shapes *all = calloc(1, sizeof *all);
    void *image = NULL;
    size_t size = 0;

    if (w == NULL || all == NULL) {
        st = th_fail(err, TH_ENOMEM, "%s: its header", path);
        goto done;
    }
    st = shapes_create(s->count, all, err);
    if (st == TH_OK)
        st = fill(c, flow, s, all, err);
    if (st != TH_OK)
        goto done;
    (void)H5Eset_auto2(H5E_DEFAULT, NULL, NULL); /* HDF5 prints its troubles otherwise */
    writer_open(w);
    put_all(w, c, all);
    image = image_of(w, &size);
    writer_close(w);
    if (image == NULL) {
        st = th_fail(err, TH_ENOMEM, "%s: HDF5 could not build the file in memory", path);
        goto done;
    }
    st = cli_file_open(path, &file, err);
    if (st == TH_OK) {
        (void)fwrite(image, 1, size, file.stream); /* a failure shows in the next line */
        st = cli_file_finish(&file, err);
    }
    cli_file_abandon(&file);
done:
    free(image);
    if (all != NULL)
        shapes_clear(all);
    free(all);
    free(w);
    return st;
}

void cli_modes_library(unsigned version[3])
{
    if (H5get_libversion(&version[0], &version[1], &version[2]) < 0)
        version[0] = version[1] = version[2] = 0;
}
