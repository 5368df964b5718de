/* Trajectories of the cases written by Boost.Numeric.Odeint: fixed steps, accepted steps, interpolated rows.

   Makes:  runs/odeint-*.csv and BUILD/odeint.jsonl (their lines of the manifest)
   Run:    c++ -O1 -std=c++17 -ffp-contract=off -o BUILD/make_odeint make_odeint.cpp
           BUILD/make_odeint BUILD runs       after   python linear_models.py --write BUILD;  make_all.sh does it all
   Needs:  libboost-dev (headers only), a C++ compiler

   Fixed steps go through integrate_n_steps, whose time is start + k*h.  The pulse is integrated edge by edge, but for
   the ladder named `unaware`: there the right-hand side looks the pulse up by time, so the last stage before an edge
   already sees the value after it. */
#include <boost/numeric/odeint.hpp>
#include <boost/version.hpp>
#include <cmath>
#include <cstdio>
#include <cstdlib>
#include <fstream>
#include <functional>
#include <iostream>
#include <string>
#include <vector>

namespace od = boost::numeric::odeint;
namespace ub = boost::numeric::ublas;
using State = std::vector<double>;
using Vector = ub::vector<double>;
using Matrix = ub::matrix<double>;
struct Row { double t; State x; };
using Rows = std::vector<Row>;

struct Model {
    std::size_t n;
    double to;
    std::vector<State> A;
    State constant, start, sine, sine_column, pulse, pulse_column;
};

static Model model;
static std::string names, build, runs;
static std::FILE *manifest;
static bool pulse_by_time;   // else pulse_now holds for the whole segment
static bool pulse_now;

static State some(std::istream &in, std::size_t n) {
    State v(n);
    for (auto &x : v) if (!(in >> x)) { std::cerr << "short model file\n"; std::exit(2); }
    return v;
}

static void load(const std::string &slug) {
    std::ifstream in(build + "/" + slug + ".model");
    Model m;
    m.n = std::size_t(some(in, 1)[0]);
    m.to = some(in, 1)[0];
    for (std::size_t i = 0; i < m.n; i++) m.A.push_back(some(in, m.n));
    m.constant = some(in, m.n), m.start = some(in, m.n);
    m.sine = some(in, 3), m.sine_column = some(in, m.n);
    m.pulse = some(in, 3), m.pulse_column = some(in, m.n);
    model = m, pulse_by_time = pulse_now = false;
    std::ifstream first_line(build + "/" + slug + ".names");
    std::getline(first_line, names);
}

template <class V> static void rate(const V &x, V &f, double t) {
    double u = model.sine[0] * std::sin(model.sine[1] * t + model.sine[2]);
    bool on = pulse_by_time ? t >= model.pulse[1] && t < model.pulse[2] : pulse_now;
    for (std::size_t i = 0; i < model.n; i++) {
        f[i] = model.constant[i] + model.sine_column[i] * u + model.pulse_column[i] * (on ? model.pulse[0] : 0);
        for (std::size_t j = 0; j < model.n; j++) f[i] += model.A[i][j] * x[j];
    }
}

static void fill(Matrix &J) {
    for (std::size_t i = 0; i < model.n; i++) for (std::size_t j = 0; j < model.n; j++) J(i, j) = model.A[i][j];
}
static void jacobian(const Vector &, Matrix &J, double) { fill(J); }                            // implicit_euler
static void jacobian_and_slope(const Vector &, Matrix &J, double t, Vector &dfdt) {             // rosenbrock4
    fill(J);
    for (std::size_t i = 0; i < model.n; i++)
        dfdt[i] = model.sine_column[i] * model.sine[0] * model.sine[1] * std::cos(model.sine[1] * t + model.sine[2]);
}

/* Keeps every row but a repeat of the one before (segments meet there). */
struct Keep {
    Rows &rows;
    template <class V> void operator()(const V &x, double t) const {
        if (rows.empty() || rows.back().t != t) rows.push_back({t, State(x.begin(), x.end())});
    }
    void operator()(const std::pair<State, State> &x, double t) const { rows.push_back({t, {x.first[0], x.second[0]}}); }
};

static long steps_of(double span, double h) { return std::lround(span / h); }

template <class Stepper> static Rows plain(Stepper stepper, double h) {
    Rows rows;
    State x = model.start;
    od::integrate_n_steps(stepper, rate<State>, x, 0.0, h, steps_of(model.to, h), Keep{rows});
    return rows;
}

/* The same with do_step from one state into another. Boost 1.74 starts adams_bashforth with an extrapolation stepper that
   reads the old state after writing the new one; where both are the same object, as in integrate_n_steps, its first rows
   are wrong. */
template <class Stepper> static Rows apart(Stepper stepper, double h) {
    Rows rows;
    State x = model.start, next = x;
    Keep keep{rows};
    keep(x, 0.0);
    for (long k = 0, steps = steps_of(model.to, h); k < steps; k++) {
        stepper.do_step(rate<State>, x, k * h, next, h);
        x = next;
        keep(x, k + 1 == steps ? model.to : (k + 1) * h);
    }
    return rows;
}

template <class Stepper> static Rows edge_by_edge(Stepper stepper, double h) {
    Rows rows;
    State x = model.start;
    double edges[] = {0, model.pulse[1], model.pulse[2], model.to};
    for (int k = 0; k < 3; k++) {
        pulse_now = k == 1;
        od::integrate_n_steps(stepper, rate<State>, x, edges[k], h, steps_of(edges[k + 1] - edges[k], h), Keep{rows});
    }
    return rows;
}

template <class Stepper, class System> static Rows with_jacobian(Stepper stepper, System system, double h) {
    Rows rows;
    Vector x(model.n);
    std::copy(model.start.begin(), model.start.end(), x.begin());
    od::integrate_n_steps(stepper, system, x, 0.0, h, steps_of(model.to, h), Keep{rows});
    return rows;
}

/* implicit_euler repeats its Newton step until the step is below this bound.  On a linear model the first step is already
   exact; a second one would factorise the factorised matrix again, at which uBLAS's own checks stop (Boost 1.74). */
static const double ONE_NEWTON_STEP = 1e9;

static Rows symplectic(double h) {   // x' = v, v' = a x
    Rows rows;
    std::pair<State, State> x{{model.start[0]}, {model.start[1]}};
    auto velocity = [](const State &v, State &f) { f[0] = v[0]; };
    auto force = [](const State &q, State &f) { f[0] = model.A[1][0] * q[0]; };
    od::integrate_n_steps(od::symplectic_euler<State>(), std::make_pair(velocity, force), x, 0.0, h, steps_of(model.to, h),
                          Keep{rows});
    return rows;
}

template <class Stepper> static Rows accepted(Stepper stepper) {
    Rows rows;
    State x = model.start;
    od::integrate_adaptive(stepper, rate<State>, x, 0.0, model.to, 1e-2, Keep{rows});
    return rows;
}

template <class Stepper> static Rows every(Stepper stepper, double h) {   // rows from the dense output
    Rows rows;
    State x = model.start, stamps;
    for (long k = 0; k <= steps_of(model.to, h); k++) stamps.push_back(k * h);
    stamps.back() = model.to;
    od::integrate_times(stepper, rate<State>, x, stamps.begin(), stamps.end(), 1e-2, Keep{rows});
    return rows;
}

struct Entry {
    const char *slug, *tag, *method;
    int order;          // 0: none stated
    const char *kind;
};

static void save(const Entry &e, const Rows &rows, const std::string &ending, double h, const char *tolerance, bool twins,
                 bool in_ladder) {
    const char *endings[] = {"", "-6dec", "-9g", "-6e"}, *forms[] = {"%.17g", "%.6f", "%.9g", "%.6e"};
    for (int k = 0; k < (twins ? 4 : 1); k++) {
        std::string ladder = std::string("odeint-") + e.slug + "-" + e.tag;
        std::string name = ladder + "-" + ending + endings[k] + ".csv";
        std::FILE *f = std::fopen((runs + "/" + name).c_str(), "w");
        if (!f) { std::perror(name.c_str()); std::exit(2); }
        std::fprintf(f, "t,%s\n", names.c_str());
        for (const Row &r : rows) {
            std::fprintf(f, forms[k], r.t);
            for (double v : r.x) { std::fputc(',', f); std::fprintf(f, forms[k], v); }
            std::fputc('\n', f);
        }
        std::fclose(f);
        char order[20], step[40];
        std::snprintf(order, sizeof order, "%d", e.order);
        std::snprintf(step, sizeof step, "%.17g", h);
        std::fprintf(manifest, "{\"file\": \"%s\", \"case\": \"outside/%s\", \"library\": \"Boost.Numeric.Odeint\", "
                     "\"library_version\": \"%d.%d.%d\", \"method\": \"%s\", \"order\": %s, \"kind\": \"%s\", \"step\": %s, "
                     "\"tolerance\": %s, \"digits_format\": \"%s\", \"ladder\": %s}\n", name.c_str(), e.slug,
                     BOOST_VERSION / 100000, BOOST_VERSION / 100 % 1000, BOOST_VERSION % 100, e.method,
                     e.order ? order : "null", e.kind, h > 0 ? step : "null", tolerance ? tolerance : "null", forms[k],
                     in_ladder && k == 0 ? ("\"" + ladder + "\"").c_str() : "null");
    }
}

static void fixed(const Entry &e, double coarsest, std::function<Rows(double)> run, int twin = -1) {
    load(e.slug);
    for (int k = 0; k < 4; k++) {
        double h = std::ldexp(coarsest, -k);
        char ending[40];
        std::snprintf(ending, sizeof ending, "h%g", h);
        save(e, run(h), ending, h, nullptr, k == twin, true);
    }
}

static void tolerances(const Entry &e, int first, int last, std::function<Rows(double)> run) {
    static const char *settings[] = {"1e-4", "1e-6", "1e-8", "1e-10"};
    load(e.slug);
    for (int k = first; k <= last; k++)
        save(e, run(std::atof(settings[k])), std::string("tol") + settings[k], 0, settings[k], false, last - first > 1);
}

int main(int argc, char **argv) {
    if (argc != 3) return 2;
    build = argv[1], runs = argv[2];
    manifest = std::fopen((build + "/odeint.jsonl").c_str(), "w");
    if (!manifest) { std::perror("odeint.jsonl"); return 2; }
    const char *steps = "fixed-step";
    fixed({"decay", "euler", "euler", 1, steps}, 0.2, [](double h) { return plain(od::euler<State>(), h); }, 1);
    fixed({"damped-oscillator", "modified_midpoint", "modified_midpoint (2 substeps)", 2, steps}, 0.2,
          [](double h) { return plain(od::modified_midpoint<State>(), h); });
    fixed({"forced-lag", "runge_kutta4", "runge_kutta4", 4, steps}, 0.2,
          [](double h) { return plain(od::runge_kutta4<State>(), h); });
    fixed({"oscillator", "runge_kutta_dopri5", "runge_kutta_dopri5", 5, steps}, 0.2,
          [](double h) { return plain(od::runge_kutta_dopri5<State>(), h); });
    fixed({"damped-oscillator", "runge_kutta_cash_karp54", "runge_kutta_cash_karp54", 5, steps}, 0.2,
          [](double h) { return plain(od::runge_kutta_cash_karp54<State>(), h); });
    fixed({"damped-oscillator", "runge_kutta_fehlberg78", "runge_kutta_fehlberg78", 8, steps}, 1.25,
          [](double h) { return plain(od::runge_kutta_fehlberg78<State>(), h); });
    fixed({"forced-lag", "adams_bashforth2", "adams_bashforth<2>, do_step from one state into another", 2, steps}, 0.2,
          [](double h) { return apart(od::adams_bashforth<2, State>(), h); });
    fixed({"tank-cascade", "adams_bashforth3", "adams_bashforth<3>, do_step from one state into another", 3, steps}, 0.1,
          [](double h) { return apart(od::adams_bashforth<3, State>(), h); }, 1);
    fixed({"decay", "adams_bashforth5", "adams_bashforth<5>, do_step from one state into another", 5, steps}, 0.2,
          [](double h) { return apart(od::adams_bashforth<5, State>(), h); });
    fixed({"tank-cascade", "adams_bashforth3-in-place", "adams_bashforth<3>, do_step in place (spoiled start)", 0, steps}, 0.2,
          [](double h) { return plain(od::adams_bashforth<3, State>(), h); });
    fixed({"oscillator", "adams_bashforth_moulton3", "adams_bashforth_moulton<3>", 3, steps}, 0.2,
          [](double h) { return plain(od::adams_bashforth_moulton<3, State>(), h); });
    fixed({"tank-cascade", "implicit_euler", "implicit_euler", 1, steps}, 0.2, [](double h) {
        return with_jacobian(od::implicit_euler<double>(ONE_NEWTON_STEP), std::make_pair(rate<Vector>, jacobian), h); });
    fixed({"stiff-pair", "implicit_euler", "implicit_euler", 0, steps}, 0.2, [](double h) {
        return with_jacobian(od::implicit_euler<double>(ONE_NEWTON_STEP), std::make_pair(rate<Vector>, jacobian), h); });
    fixed({"damped-oscillator", "rosenbrock4", "rosenbrock4", 4, steps}, 0.2, [](double h) {
        return with_jacobian(od::rosenbrock4<double>(), std::make_pair(rate<Vector>, jacobian_and_slope), h); });
    fixed({"forced-lag", "rosenbrock4", "rosenbrock4 (its d4 has the wrong sign, which shows where time enters)", 0, steps}, 0.2,
          [](double h) {
        return with_jacobian(od::rosenbrock4<double>(), std::make_pair(rate<Vector>, jacobian_and_slope), h); });
    fixed({"oscillator", "symplectic_euler", "symplectic_euler", 1, steps}, 0.2, symplectic);
    fixed({"heat-chain", "runge_kutta4", "runge_kutta4", 4, steps}, 0.25,
          [](double h) { return edge_by_edge(od::runge_kutta4<State>(), h); });
    fixed({"heat-chain", "runge_kutta4-unaware", "runge_kutta4 (last stage sees the jump early)", 0, steps}, 0.5,
          [](double h) { pulse_by_time = true; return plain(od::runge_kutta4<State>(), h); });

    tolerances({"damped-oscillator", "dopri5-accepted", "runge_kutta_dopri5, make_controlled", 0, "accepted-steps"}, 0, 3,
               [](double e) { return accepted(od::make_controlled<od::runge_kutta_dopri5<State>>(e, e)); });
    tolerances({"oscillator", "bulirsch_stoer-accepted", "bulirsch_stoer", 0, "accepted-steps"}, 1, 2,
               [](double e) { return accepted(od::bulirsch_stoer<State>(e, e)); });
    tolerances({"tank-cascade", "dopri5-every", "runge_kutta_dopri5, make_dense_output", 0, "interpolated"}, 0, 3,
               [](double e) { return every(od::make_dense_output<od::runge_kutta_dopri5<State>>(e, e), 0.05); });
    tolerances({"oscillator", "bulirsch_stoer-every", "bulirsch_stoer_dense_out", 0, "interpolated"}, 1, 1,
               [](double e) { return every(od::bulirsch_stoer_dense_out<State>(e, e), 0.05); });
    return std::fclose(manifest) != 0;
}
