#!/usr/bin/env python3
"""Trajectories of the cases written by SciPy's solve_ivp: fixed steps, accepted steps, interpolated rows.

Makes:  runs/scipy-*.csv and BUILD/scipy.jsonl (their lines of the manifest)
Run:    python make_scipy.py BUILD      after   python linear_models.py --write BUILD;  make_all.sh does both
Needs:  scipy

A fixed step is had by first_step = max_step = h with error settings so wide that no step is refused.  solve_ivp adds
the time up, so such files may end on one tiny last step.  The pulse is integrated edge by edge, but for the files
named `unaware`, where the right-hand side looks the pulse up by time and the solver knows nothing of its edges.
"""
import json
import sys
from pathlib import Path

import numpy as np
import scipy
from scipy.integrate import solve_ivp

from linear_models import read

BUILD = Path(sys.argv[1])
RUNS = Path(__file__).resolve().parent / "runs"
FORMATS = {"": "%.17g", "-6dec": "%.6f", "-9g": "%.9g", "-6e": "%.6e"}
WIDE = 1e9
manifest = open(BUILD / "scipy.jsonl", "w")


def solve(slug, method, unaware=False, every=None, **options):
    m = read(BUILD, slug)
    A, constant = np.array(m["A"]), np.array(m["constant"])
    amplitude, w, phase, sine_column = m["sine"]
    height, begin, end, pulse_column = m["pulse"]
    sine_column, pulse_column = np.array(sine_column), np.array(pulse_column)
    edges = [0.0, begin, end, m["to"]] if height and not unaware else [0.0, m["to"]]
    t, y = [0.0], [np.array(m["start"])]
    if method in ("Radau", "BDF"):
        options["jac"] = A
    for a, b in zip(edges, edges[1:]):
        on = a >= begin and b <= end

        def rate(t, x):
            pulse = height * (begin <= t < end) if unaware else height * on
            return A @ x + constant + sine_column * (amplitude * np.sin(w * t + phase)) + pulse_column * pulse

        grid = None
        if every:
            grid = np.arange(round(a / every), round(b / every) + 1) * every
            grid[-1] = b
        got = solve_ivp(rate, (a, b), y[-1], method=method, t_eval=grid, **options)
        assert got.success, got.message
        t += list(got.t[1:])
        y += list(got.y.T[1:])
    return t, y


def save(slug, method, tag, t, y, order, kind, step, tolerance, ladder, twins=False):
    names = (BUILD / f"{slug}.names").read_text().strip()
    for ending, form in FORMATS.items():
        if ending and not twins:
            continue
        name = f"scipy-{slug}-{tag}{ending}.csv"
        rows = [",".join(form % v for v in (a, *b)) for a, b in zip(t, y)]
        (RUNS / name).write_text("\n".join([f"t,{names}", *rows]) + "\n")
        line = dict(file=name, case=f"outside/{slug}", library="SciPy", library_version=scipy.__version__,
                    method=f"solve_ivp(method='{method}')", order=order, kind=kind, step=step, tolerance=tolerance,
                    digits_format=form, ladder=None if ending else ladder)
        print(json.dumps(line), file=manifest)


def fixed(slug, method, order, steps, twin=None):
    for h in steps:
        t, y = solve(slug, method, first_step=h, max_step=h, rtol=WIDE, atol=WIDE)
        save(slug, method, f"{method.lower()}-h{h:g}", t, y, order, "fixed-step", h, None,
             f"scipy-{slug}-{method.lower()}", twins=h == twin)


def tolerances(slug, method, settings, every=None, unaware=False, twin=None):
    tag = method.lower() + ("-every" if every else "-accepted") + ("-unaware" if unaware else "")
    for s in settings:
        t, y = solve(slug, method, unaware=unaware, every=every, rtol=float(s), atol=float(s))
        save(slug, method, f"{tag}-tol{s}", t, y, None, "interpolated" if every else "accepted-steps", None, float(s),
             f"scipy-{slug}-{tag}" if len(settings) > 2 else None, twins=s == twin)


FOUR = ["1e-4", "1e-6", "1e-8", "1e-10"]
HALVING = [0.2, 0.1, 0.05, 0.025]
fixed("tank-cascade", "RK23", 3, HALVING)
fixed("oscillator", "RK45", 5, HALVING, twin=0.05)
fixed("damped-oscillator", "DOP853", 8, [1.25, 0.625, 0.3125, 0.15625])
fixed("damped-oscillator", "Radau", 5, HALVING)
tolerances("forced-lag", "RK45", FOUR, twin="1e-6")
tolerances("oscillator", "DOP853", FOUR)
tolerances("stiff-pair", "Radau", FOUR)
tolerances("stiff-pair", "BDF", FOUR)
tolerances("tank-cascade", "LSODA", FOUR)
tolerances("heat-chain", "RK45", ["1e-4", "1e-6"])
tolerances("heat-chain", "RK45", ["1e-6"], unaware=True)
tolerances("damped-oscillator", "RK45", FOUR, every=0.05)
tolerances("oscillator", "LSODA", ["1e-6", "1e-8"], every=0.05)
tolerances("stiff-pair", "Radau", ["1e-6"], every=0.05)
tolerances("heat-chain", "BDF", ["1e-6"], every=0.0625)
tolerances("forced-lag", "DOP853", ["1e-8"], every=0.05)
