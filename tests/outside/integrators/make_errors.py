#!/usr/bin/env python3
"""The certified error of every file in runs/, and the observed order of every ladder, by ball arithmetic.

Makes:  runs/errors.json
Run:    python make_errors.py            (some seconds; reads runs/manifest.json, runs/*.csv and cases/)
Needs:  python-flint

Exactness: the numbers of a case are the binary64 nearest to their decimals, all that follows from them is a fraction;
stamps and values of a file are the decimals as printed.  State, constant and sine generator together obey z' = M z, so
from stamp to stamp z is multiplied by exp(M dt), enclosed by Arb at PRECISION bits, with the pulse's edges as extra
stops.  Every enclosure's radius is asserted to be below 1e-30 of the channel's peak, every error's below 1e-20 of the
error itself.  A closed form written by hand is held against each case's first and last stamps and many between.

errors.json: "files": name -> {"rows", "channels": name -> {worst_error, at, rms_error, end_error, peak}}
               worst_error: largest |written - exact|; at: its stamp; end_error: written - exact in the last row;
               peak: largest |exact| at the stamps.  Numbers are the binary64 nearest to the true value.
             "ladders": name -> {"variable": "step" or "tolerance", "order", "settings", "observed": channel -> the slope
               of worst error over setting between neighbours, coarsest pair first}
"""
import json
import sys
from fractions import Fraction
from pathlib import Path

from flint import arb, arb_mat, ctx, fmpq

from linear_models import HERE, all_models

PRECISION = 1536
# Started at rest, symplectic Euler's velocities are right to second order; its positions are not.
FASTER_CHANNELS = {("odeint-oscillator-symplectic_euler", "v"): 2}
ctx.prec = PRECISION


def ball(q):
    q = Fraction(q)
    return arb(fmpq(q.numerator, q.denominator))


def nearest(x):
    """The binary64 nearest to a ball's middle; the asserts see to it that the ball is far narrower than that."""
    return float(x.mid().str(40, radius=False))


class Exact:
    """A case's solution from stamp to stamp."""

    def __init__(self, model):
        self.model, self.n = model, len(model["names"])
        self.generators, self.exponentials = {}, {}
        m = model
        self.edges = [m["pulse"][1], m["pulse"][2]] if m["pulse"] else []
        self.start = [ball(x) for x in m["start"]] + [arb(1)]
        if m["sine"]:
            phase = ball(m["sine"][2])
            self.start += [phase.sin(), phase.cos()]

    def generator(self, on):
        if on not in self.generators:
            m, n, size = self.model, self.n, len(self.start)
            rows = [[Fraction(0)] * size for _ in range(size)]
            for i in range(n):
                rows[i][:n] = m["A"][i]
                rows[i][n] = m["constant"][i] + (m["pulse"][0] * m["pulse"][3][i] if on else 0)
                if m["sine"]:
                    rows[i][n + 1] = m["sine"][0] * m["sine"][3][i]
            if m["sine"]:
                rows[n + 1][n + 2], rows[n + 2][n + 1] = m["sine"][1], -m["sine"][1]
            self.generators[on] = arb_mat([[ball(x) for x in r] for r in rows])
        return self.generators[on]

    def step(self, z, a, b):
        for stop in [e for e in self.edges if a < e < b] + [b]:
            on = bool(self.edges) and self.edges[0] <= a and stop <= self.edges[1]
            key = (stop - a, on)
            if key not in self.exponentials:
                self.exponentials[key] = (self.generator(on) * ball(stop - a)).exp()
            z, a = self.exponentials[key] * z, stop
        return z

    def at(self, stamps):
        """Values (lists of balls) at stamps that never fall."""
        z, t, out = arb_mat([[x] for x in self.start]), self.model["time_from"], []
        for stamp in stamps:
            if stamp != t:
                z = self.step(z, t, stamp)
            t = stamp
            out.append([z[i, 0] for i in range(self.n)])
        return out


# ---------------------------------------------------------------- closed forms, worked out by hand
def by_hand(slug, p, start, t):
    """The exact values at t > 0 from a formula of its own, or None."""
    if slug == "decay":
        return [start[0] * (-p["k"] * t).exp()]
    if slug == "oscillator":
        w = p["w"]
        return [(w * t).cos(), -w * (w * t).sin()]
    if slug == "damped-oscillator":
        rest, a = p["F"] / p["s"], p["c"] / (2 * p["m"])
        w = (p["s"] / p["m"] - a * a).sqrt()
        x, v = start[0] - rest, start[1]
        fade, b = (-a * t).exp(), (v + a * x) / w
        c, s = (w * t).cos(), (w * t).sin()
        return [rest + fade * (x * c + b * s), fade * ((b * w - a * x) * c - (x * w + a * b) * s)]
    if slug == "stiff-pair":      # eigenvalues by the quadratic formula, then Lagrange interpolation of exp
        a, b, g = p["k_slow"], p["k_quick"], p["g"]
        root = ((a - b) ** 2 + 4 * g * b).sqrt()
        u, w = (-(a + b) + root) / 2, (-(a + b) - root) / 2
        slow, quick = start
        f = [-a * slow + g * quick, b * (slow - quick)]
        eu, ew = (u * t).exp(), (w * t).exp()
        return [(eu * (f[i] - w * start[i]) - ew * (f[i] - u * start[i])) / (u - w) for i in range(2)]
    if slug == "forced-lag":      # y' = (S sin(w t + phi) - y)/tau
        tau, w, phi = p["tau"], p["w"], p["phi"]
        settled = lambda t: p["swing"] / (1 + (w * tau) ** 2) * ((w * t + phi).sin() - w * tau * (w * t + phi).cos())
        return [settled(t) + (start[0] - settled(arb(0))) * (-t / tau).exp()]
    if slug == "tank-cascade":    # two equal rates r = d/A, then a third s = d/A_3; deviations from the level q/d
        r, s, level = p["d"] / p["A_1"], p["d"] / p["A_3"], p["q"] / p["d"]
        a, b, c = (x - level for x in start)
        er, es = (-r * t).exp(), (-s * t).exp()
        k = 1 / (s - r)           # lower' = s (middle - lower), middle = (b + a r t) e^(-r t)
        lower = c * es + s * (b * k * (er - es) + a * r * (t * k * er - k * k * (er - es)))
        return [level + a * er, level + (b + a * r * t) * er, level + lower]
    if slug == "heat-chain":      # modes cos((j - 1/2) w), w = (2k - 1) pi/17: closed at one end, held at zero beyond the other
        values = [arb(0)] * 8
        for k in range(1, 9):
            w = (2 * k - 1) * arb.pi() / 17
            mode = [((2 * j - 1) * w / 2).cos() for j in range(1, 9)]
            rate = p["G"] / p["C"] * 4 * (w / 2).sin() ** 2
            size = sum((x * x for x in mode), arb(0))
            amount = sum((x * y for x, y in zip(mode, start)), arb(0)) / size * (-rate * t).exp()
            late, early = max(t - 1, arb(0), key=nearest), max(t - arb(5) / 2, arb(0), key=nearest)
            amount += p["P"] / p["C"] * mode[0] / size / rate * ((-rate * early).exp() - (-rate * late).exp())
            values = [v + amount * x for v, x in zip(values, mode)]
        return values
    raise ValueError(slug)


def check_by_hand(exact):
    m = exact.model
    p, start = {k: ball(v) for k, v in m["parameters"].items()}, [ball(x) for x in m["start"]]
    stamps = [Fraction(k, 100) for k in range(1, 501, 7)] + [m["time_to"]]
    for t, values in zip(stamps, exact.at(stamps)):
        for a, b in zip(values, by_hand(m["slug"], p, start, ball(t))):
            assert a.overlaps(b) and nearest(abs(a - b) + a.rad() + b.rad()) < 1e-200, (m["slug"], t)


# ---------------------------------------------------------------- files
def read_rows(path, names):
    lines = path.read_text().splitlines()
    assert lines[0].split(",") == ["t", *names], path
    return [[Fraction(cell) for cell in line.split(",")] for line in lines[1:]]


def errors_of(exact, entry):
    model = exact.model
    rows = read_rows(HERE / "runs" / entry["file"], model["names"])
    stamps = [r[0] for r in rows]
    assert all(a <= b for a, b in zip(stamps, stamps[1:])), entry["file"]
    assert stamps[0] == model["time_from"] and stamps[-1] == model["time_to"], entry["file"]
    fewer_digits = entry["digits_format"] != "%.17g"
    assert fewer_digits or all(float(a) == float(b) for a, b in zip(rows[0][1:], model["start"])), entry["file"]
    values = exact.at(stamps)
    channels = {}
    for i, name in enumerate(model["names"]):
        truth = [v[i] for v in values]
        peak = max(truth, key=lambda x: nearest(abs(x)))
        peak = abs(peak)
        assert all(nearest(x.rad()) < 1e-30 * nearest(peak) for x in truth), entry["file"]
        errors = [ball(r[i + 1]) - x for r, x in zip(rows, truth)]
        k = max(range(len(rows)), key=lambda k: nearest(abs(errors[k])))
        mean_square = sum((e * e for e in errors), arb(0)) / len(errors)
        for e in (errors[k], errors[-1], mean_square.sqrt()):
            assert nearest(e.rad()) <= 1e-20 * abs(nearest(e)), entry["file"]
        channels[name] = dict(worst_error=abs(nearest(errors[k])), at=float(stamps[k]),
                              rms_error=nearest(mean_square.sqrt()), end_error=nearest(errors[-1]), peak=nearest(peak))
    return dict(rows=len(rows), channels=channels)


def slope(e1, e2, h1, h2):
    return float((arb(e1) / arb(e2)).log() / (arb(h1) / arb(h2)).log())


def ladder_of(entries, files):
    variable = "step" if entries[0]["step"] is not None else "tolerance"
    entries = sorted(entries, key=lambda e: -e[variable])
    assert len({e["case"] for e in entries}) == 1 and len({e["method"] for e in entries}) == 1
    settings = [e[variable] for e in entries]
    observed = {}
    for name in files[entries[0]["file"]]["channels"]:
        worst = [files[e["file"]]["channels"][name]["worst_error"] for e in entries]
        peak = files[entries[0]["file"]]["channels"][name]["peak"]
        observed[name] = [slope(*worst[k:k + 2], *settings[k:k + 2]) for k in range(len(worst) - 1)]
        if entries[0]["order"]:     # every rung clear of rounding and below the size of the solution
            assert len(worst) == 4 and all(1e-11 * peak < e < peak for e in worst), (entries[0]["ladder"], name, worst)
    return dict(variable=variable, order=entries[0]["order"], settings=settings, observed=observed)


def check_euler_by_hand(files):
    """Forward Euler on x' = -x wrote (1 - h)^n, so its errors are (1 - h)^n - exp(-n h), but for its rounding."""
    for h in (0.2, 0.1, 0.05, 0.025):
        steps = round(5 / h)
        by_formula = [nearest((1 - ball(Fraction(str(h)))) ** n - (-ball(Fraction(str(h))) * n).exp())
                      for n in range(steps + 1)]
        got = files[f"odeint-decay-euler-h{h:g}.csv"]["channels"]["x"]
        assert abs(got["worst_error"] - max(map(abs, by_formula))) < 1e-15, h
        assert abs(got["end_error"] - by_formula[-1]) < 1e-16, h


def main():
    exact = {f"outside/{slug}": Exact(m) for slug, m in all_models().items()}
    for e in exact.values():
        check_by_hand(e)
    manifest = json.loads((HERE / "runs/manifest.json").read_text())
    files = {e["file"]: errors_of(exact[e["case"]], e) for e in manifest}
    check_euler_by_hand(files)
    groups = {}
    for e in manifest:
        if e["ladder"]:
            groups.setdefault(e["ladder"], []).append(e)
    ladders = {name: ladder_of(group, files) for name, group in sorted(groups.items())}
    off = []
    for name, l in ladders.items():
        for channel, orders in l["observed"].items():
            print(f"{name:55} {channel:7}", l["variable"], l["order"], " ".join("%.3f" % o for o in orders))
            if l["order"] and abs(orders[-1] - FASTER_CHANNELS.get((name, channel), l["order"])) > 0.1:
                off.append((name, channel))
    line = lambda d: ",\n".join(f" {json.dumps(k)}: {json.dumps(v)}" for k, v in d.items())
    (HERE / "runs/errors.json").write_text(
        '{"files": {\n' + line(files) + '\n},\n"ladders": {\n' + line(ladders) + "\n}}\n")
    print(len(files), "files,", len(ladders), "ladders")
    if off:
        sys.exit(f"observed order off the theoretical one: {off}")


if __name__ == "__main__":
    main()
