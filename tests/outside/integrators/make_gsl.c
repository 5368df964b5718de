/* Trajectories of the cases written by the GNU Scientific Library's gsl_odeiv2: fixed steps and accepted steps.

   Makes:  runs/gsl-*.csv and BUILD/gsl.jsonl (their lines of the manifest)
   Run:    cc -O1 -ffp-contract=off -o BUILD/make_gsl make_gsl.c -lgsl -lgslcblas -lm
           BUILD/make_gsl BUILD runs          after   python linear_models.py --write BUILD;  make_all.sh does it all
   Needs:  libgsl-dev, a C compiler

   Three ways to a fixed step, as the library offers them:
     step     gsl_odeiv2_step_apply at t = k*h: time is a multiple
     driver   gsl_odeiv2_driver_apply_fixed_step row by row: time is added up (steps here are powers of two, so exactly)
     evolve   gsl_odeiv2_evolve_apply without a step-size control: time is added up, the last step is cut to reach the end
   Accepted steps come from gsl_odeiv2_evolve_apply with gsl_odeiv2_control_y_new(tol, tol).
   rk2 is the embedded (2, 3) pair and goes on from its third-order result: order 3.  rk4, rk1imp, rk2imp and rk4imp take
   two half steps to a step.  An implicit step's inner iteration takes its error level from a driver (1e-14 here). */
#include <gsl/gsl_errno.h>
#include <gsl/gsl_odeiv2.h>
#include <gsl/gsl_version.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { MOST = 8 };
static struct { size_t n; double to, A[MOST][MOST], constant[MOST], start[MOST], sine[3], sine_column[MOST]; } model;
static char names[200];
static const char *build, *runs;
static FILE *manifest;

static int rate(double t, const double x[], double f[], void *unused) {
    (void)unused;
    double u = model.sine[0] * sin(model.sine[1] * t + model.sine[2]);
    for (size_t i = 0; i < model.n; i++) {
        f[i] = model.constant[i] + model.sine_column[i] * u;
        for (size_t j = 0; j < model.n; j++) f[i] += model.A[i][j] * x[j];
    }
    return GSL_SUCCESS;
}

static int jacobian(double t, const double x[], double *dfdx, double dfdt[], void *unused) {
    (void)x, (void)unused;
    double slope = model.sine[0] * model.sine[1] * cos(model.sine[1] * t + model.sine[2]);
    for (size_t i = 0; i < model.n; i++) {
        dfdt[i] = model.sine_column[i] * slope;
        for (size_t j = 0; j < model.n; j++) dfdx[i * model.n + j] = model.A[i][j];
    }
    return GSL_SUCCESS;
}

static void number(FILE *f, double *x) {
    if (fscanf(f, "%lf", x) != 1) { fprintf(stderr, "short model file\n"); exit(2); }
}

static void load(const char *slug) {
    char path[500];
    double n, pulse[3], unused;
    snprintf(path, sizeof path, "%s/%s.model", build, slug);
    FILE *f = fopen(path, "r");
    if (!f) { perror(path); exit(2); }
    number(f, &n);
    model.n = (size_t)n;
    number(f, &model.to);
    for (size_t i = 0; i < model.n; i++) for (size_t j = 0; j < model.n; j++) number(f, &model.A[i][j]);
    for (size_t i = 0; i < model.n; i++) number(f, &model.constant[i]);
    for (size_t i = 0; i < model.n; i++) number(f, &model.start[i]);
    for (size_t i = 0; i < 3; i++) number(f, &model.sine[i]);
    for (size_t i = 0; i < model.n; i++) number(f, &model.sine_column[i]);
    for (size_t i = 0; i < 3; i++) number(f, &pulse[i]);
    for (size_t i = 0; i < model.n; i++) number(f, &unused);
    if (pulse[0] != 0) { fprintf(stderr, "no pulse here\n"); exit(2); }
    fclose(f);
    snprintf(path, sizeof path, "%s/%s.names", build, slug);
    f = fopen(path, "r");
    if (!f || !fgets(names, sizeof names, f)) { perror(path); exit(2); }
    names[strcspn(names, "\n")] = 0;
    fclose(f);
}

static void row(FILE *f, const char *form, double t, const double *x) {
    fprintf(f, form, t);
    for (size_t i = 0; i < model.n; i++) { fputc(',', f); fprintf(f, form, x[i]); }
    fputc('\n', f);
}

static void check(int status) {
    if (status != GSL_SUCCESS) { fprintf(stderr, "gsl: %s\n", gsl_strerror(status)); exit(2); }
}

static void write_run(const gsl_odeiv2_step_type *type, char way, double h, double tolerance, FILE *f, const char *form) {
    gsl_odeiv2_system system = { rate, jacobian, model.n, NULL };
    double level = way == 'a' ? tolerance : 1e-14;
    gsl_odeiv2_driver *d = gsl_odeiv2_driver_alloc_y_new(&system, type, way == 'a' ? 1e-3 : h, level, level);
    double t = 0, x[MOST], error[MOST], next = way == 'a' ? 1e-3 : h;
    memcpy(x, model.start, sizeof x);
    fprintf(f, "t,%s\n", names);
    row(f, form, t, x);
    if (way == 's') {
        for (int k = 0, steps = (int)lround(model.to / h); k < steps; k++) {
            check(gsl_odeiv2_step_apply(d->s, k * h, h, x, error, NULL, NULL, &system));
            row(f, form, k + 1 == steps ? model.to : (k + 1) * h, x);
        }
    } else if (way == 'd') {
        gsl_odeiv2_driver *wide = gsl_odeiv2_driver_alloc_y_new(&system, type, h, 1e9, 1e9);
        while (t < model.to) {
            check(gsl_odeiv2_driver_apply_fixed_step(wide, &t, h, 1, x));
            row(f, form, t, x);
        }
        gsl_odeiv2_driver_free(wide);
    } else {
        gsl_odeiv2_control *control = way == 'a' ? d->c : NULL;
        while (t < model.to) {
            check(gsl_odeiv2_evolve_apply(d->e, control, d->s, &system, &t, model.to, &next, x));
            row(f, form, t, x);
        }
    }
    gsl_odeiv2_driver_free(d);
}

static void save(const char *slug, const gsl_odeiv2_step_type *type, char way, int order, double h, const char *tolerance,
                 int twins, int in_ladder) {
    static const char *endings[] = { "", "-6dec", "-9g", "-6e" }, *forms[] = { "%.17g", "%.6f", "%.9g", "%.6e" };
    load(slug);
    for (int k = 0; k < (twins ? 4 : 1); k++) {
        char tag[100], name[200], path[700], ladder[150], order_text[20], step_text[40];
        if (way == 'a') snprintf(tag, sizeof tag, "accepted-tol%s", tolerance);
        else snprintf(tag, sizeof tag, "h%g", h);
        snprintf(name, sizeof name, "gsl-%s-%s-%s%s.csv", slug, type->name, tag, endings[k]);
        snprintf(path, sizeof path, "%s/%s", runs, name);
        FILE *f = fopen(path, "w");
        if (!f) { perror(path); exit(2); }
        write_run(type, way, h, tolerance ? atof(tolerance) : 0, f, forms[k]);
        fclose(f);
        snprintf(ladder, sizeof ladder, "\"gsl-%s-%s%s\"", slug, type->name, way == 'a' ? "-accepted" : "");
        snprintf(order_text, sizeof order_text, "%d", order);
        snprintf(step_text, sizeof step_text, "%.17g", h);
        fprintf(manifest, "{\"file\": \"%s\", \"case\": \"outside/%s\", \"library\": \"GNU Scientific Library\", "
                "\"library_version\": \"%s\", \"method\": \"gsl_odeiv2_step_%s (gsl_odeiv2_%s)\", \"order\": %s, "
                "\"kind\": \"%s\", \"step\": %s, \"tolerance\": %s, \"digits_format\": \"%s\", \"ladder\": %s}\n",
                name, slug, gsl_version, type->name,
                way == 's' ? "step_apply" : way == 'd' ? "driver_apply_fixed_step" : "evolve_apply",
                order ? order_text : "null", way == 'a' ? "accepted-steps" : "fixed-step", way == 'a' ? "null" : step_text,
                way == 'a' ? tolerance : "null", forms[k], k == 0 && in_ladder ? ladder : "null");
    }
}

static void fixed(const char *slug, const gsl_odeiv2_step_type *type, char way, int order, double coarsest, int twin) {
    for (int k = 0; k < 4; k++) save(slug, type, way, order, ldexp(coarsest, -k), NULL, k == twin, 1);
}

static void tolerances(const char *slug, const gsl_odeiv2_step_type *type, int first, int last) {
    static const char *settings[] = { "1e-4", "1e-6", "1e-8", "1e-10" };
    for (int k = first; k <= last; k++) save(slug, type, 'a', 0, 0, settings[k], 0, last - first > 1);
}

int main(int argc, char **argv) {
    if (argc != 3) return 2;
    build = argv[1], runs = argv[2];
    char path[500];
    snprintf(path, sizeof path, "%s/gsl.jsonl", build);
    manifest = fopen(path, "w");
    if (!manifest) { perror(path); return 2; }
    fixed("damped-oscillator", gsl_odeiv2_step_rk2, 's', 3, 0.2, 2);
    fixed("oscillator", gsl_odeiv2_step_rk4, 'd', 4, 0.25, -1);
    fixed("damped-oscillator", gsl_odeiv2_step_rkf45, 'e', 5, 0.2, 1);
    fixed("forced-lag", gsl_odeiv2_step_rkck, 's', 5, 0.2, -1);
    fixed("forced-lag", gsl_odeiv2_step_rk8pd, 'e', 8, 1.25, -1);
    fixed("tank-cascade", gsl_odeiv2_step_rk1imp, 's', 1, 0.2, -1);
    fixed("damped-oscillator", gsl_odeiv2_step_rk2imp, 's', 2, 0.2, -1);
    fixed("forced-lag", gsl_odeiv2_step_rk4imp, 's', 4, 0.2, -1);
    tolerances("oscillator", gsl_odeiv2_step_msadams, 0, 3);
    tolerances("stiff-pair", gsl_odeiv2_step_msbdf, 0, 3);
    tolerances("stiff-pair", gsl_odeiv2_step_bsimp, 0, 3);
    tolerances("forced-lag", gsl_odeiv2_step_rk8pd, 1, 2);
    return fclose(manifest) != 0;
}
