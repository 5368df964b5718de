#!/usr/bin/env python3
"""Make the enclosure files beside this script: certified solutions of all built-in cases.

What it makes
    For every reference-cases/<field>/<slug>.toml one file <field>--<slug>.json here:
    50 to 60 time stamps (binary64, taken exactly) and, for each state and output, the true
    value to 32 significant digits, plus the largest magnitude seen in each channel (`peak`).
    The solution is enclosed in ball arithmetic (Arb); the script stops when a ball is not at
    least 1e20 times smaller than the last printed digit, so all printed digits are certified.

How it takes the numbers of a case
    Every number in a file, and every literal inside a formula, is the nearest binary64
    number, taken exactly.  All arithmetic on them is exact (rationals) or enclosed (balls):
    a derived parameter, a coefficient such as 1/(R*C) or a jump time such as from + k*period
    is not rounded again, and pi is the true pi.

How it solves
    It reads the files with a formula reader of its own (nothing is shared with the program),
    turns rates into a matrix, adds a small linear system for each input (value and its
    derivatives, or a sine and cosine pair, or an exponential), and multiplies by enclosed
    matrix exponentials from jump to jump.  At a jump the value after it counts.

What it checks
    Where a case states closed forms, they are enclosed at every stamp too; the script stops
    if formula and propagator differ by more than 1e-25 of the channel's peak.

Needs     Python 3.11 or newer and python-flint (pip install python-flint).
Run       python3 tests/outside/enclosures/make_enclosures.py            all cases
          python3 tests/outside/enclosures/make_enclosures.py rc- decay/ names holding one of these
          ... --check                                                    check only, write nothing
"""
import json
import math
import pathlib
import random
import re
import sys
import tomllib
from fractions import Fraction

import flint
from flint import arb, arb_mat, ctx, fmpq

BITS = 2048                       # working precision of all balls
DIGITS = 32                       # printed significant digits
STAMPS = 56                       # time stamps for each case
CLOSED_FORM_TOLERANCE = 1e-25     # formula against propagator, of the channel's peak
TINY = Fraction(1, 10**340)       # balls inside +-TINY are printed as 0 (binary64 ends at 5e-324)

HERE = pathlib.Path(__file__).resolve().parent
CASES = HERE.parents[2] / "reference-cases"
ctx.prec = BITS


class Refused(Exception):
    """The case cannot be read or contradicts itself."""


# ---------------------------------------------------------------- numbers: Fraction where exact, else arb
def ball(x):
    return x if isinstance(x, arb) else arb(fmpq(x.numerator, x.denominator))


def exact_f64(x):
    """The binary64 number nearest to what is written, as a rational."""
    return Fraction(float(x))


def plus(a, b):
    return a + b if isinstance(a, Fraction) and isinstance(b, Fraction) else ball(a) + ball(b)


def minus(a, b):
    return a - b if isinstance(a, Fraction) and isinstance(b, Fraction) else ball(a) - ball(b)


def times(a, b):
    if isinstance(a, Fraction) and isinstance(b, Fraction):
        return a * b
    if a == 0 or b == 0:          # exact zero stays exact
        return Fraction(0)
    return ball(a) * ball(b)


def over(a, b):
    if isinstance(b, Fraction) and b == 0:
        raise Refused("division by zero")
    return a / b if isinstance(a, Fraction) and isinstance(b, Fraction) else ball(a) / ball(b)


def power(a, b):
    if isinstance(b, Fraction) and b.denominator == 1 and abs(b) <= 64:
        return a ** int(b) if isinstance(a, Fraction) else a ** int(b)
    return (ball(b) * ball(a).log()).exp()


def sign(a):
    if isinstance(a, Fraction):
        return (a > 0) - (a < 0)
    if a > 0:
        return 1
    if a < 0:
        return -1
    raise Refused("cannot tell the sign of %s" % a)


FUNCTIONS = {
    "exp": (1, lambda a: Fraction(1) if a == 0 else ball(a).exp()),
    "ln": (1, lambda a: ball(a).log()),
    "sqrt": (1, lambda a: ball(a).sqrt()),
    "sin": (1, lambda a: Fraction(0) if a == 0 else ball(a).sin()),
    "cos": (1, lambda a: Fraction(1) if a == 0 else ball(a).cos()),
    "tan": (1, lambda a: ball(a).tan()),
    "sinh": (1, lambda a: Fraction(0) if a == 0 else ball(a).sinh()),
    "cosh": (1, lambda a: ball(a).cosh()),
    "tanh": (1, lambda a: ball(a).tanh()),
    "abs": (1, abs),
    "min": (2, lambda a, b: a if sign(minus(a, b)) <= 0 else b),
    "max": (2, lambda a, b: a if sign(minus(a, b)) >= 0 else b),
    "heaviside": (1, lambda a: Fraction(1 if sign(a) >= 0 else 0)),
}


# ---------------------------------------------------------------- formulas: text -> tree
TOKEN = re.compile(r"\s*(?:((?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)|([A-Za-z_]\w*)|([-+*/^(),]))", re.A)


def parse(text):
    tokens, at = [], 0
    text = text.strip()
    while at < len(text):
        m = TOKEN.match(text, at)
        if not m:
            raise Refused("cannot read %r at %d" % (text, at))
        tokens.append(m.groups())
        at = m.end()
    tokens.append((None, None, None))
    i = 0

    def peek():
        return tokens[i][2]

    def take(mark):
        nonlocal i
        if tokens[i][2] != mark:
            raise Refused("expected %r in %r" % (mark, text))
        i += 1

    def total():
        nonlocal i
        left = product()
        while peek() in ("+", "-"):
            op = peek()
            i += 1
            left = (op, left, product())
        return left

    def product():
        nonlocal i
        left = signed()
        while peek() in ("*", "/"):
            op = peek()
            i += 1
            left = (op, left, signed())
        return left

    def signed():                 # -2^2 is -(2^2)
        nonlocal i
        if peek() in ("-", "+"):
            op = peek()
            i += 1
            inner = signed()
            return ("neg", inner) if op == "-" else inner
        return raised()

    def raised():                 # 2^3^2 is 2^(3^2)
        nonlocal i
        base = atom()
        if peek() == "^":
            i += 1
            return ("^", base, signed())
        return base

    def atom():
        nonlocal i
        number, name, mark = tokens[i]
        if number is not None:
            i += 1
            return ("number", exact_f64(number))
        if name is not None:
            i += 1
            if name in FUNCTIONS:
                take("(")
                args = [total()]
                while peek() == ",":
                    i += 1
                    args.append(total())
                take(")")
                if len(args) != FUNCTIONS[name][0]:
                    raise Refused("%s takes %d values: %r" % (name, FUNCTIONS[name][0], text))
                return ("call", name, args)
            return ("name", name)
        if mark == "(":
            i += 1
            inner = total()
            take(")")
            return inner
        raise Refused("cannot read %r" % text)

    tree = total()
    if i != len(tokens) - 1:
        raise Refused("text left over in %r" % text)
    return tree


def evaluate(tree, names):
    kind = tree[0]
    if kind == "number":
        return tree[1]
    if kind == "name":
        if tree[1] == "pi":
            return arb.pi()
        if tree[1] not in names:
            raise Refused("unknown name %r" % tree[1])
        return names[tree[1]]
    if kind == "neg":
        return -evaluate(tree[1], names)
    if kind == "call":
        return FUNCTIONS[tree[1]][1](*[evaluate(a, names) for a in tree[2]])
    a, b = evaluate(tree[1], names), evaluate(tree[2], names)
    return {"+": plus, "-": minus, "*": times, "/": over, "^": power}[kind](a, b)


# ---------------------------------------------------------------- affine formulas: {None: constant, name: coefficient}
def affine(tree, names, variables):
    kind = tree[0]
    if kind == "name" and tree[1] in variables:
        return {tree[1]: Fraction(1)}
    if kind in ("number", "name"):
        return {None: evaluate(tree, names)}
    if kind == "neg":
        return {k: -v for k, v in affine(tree[1], names, variables).items()}
    if kind == "call":
        parts = [affine(a, names, variables) for a in tree[2]]
        if any(k is not None for p in parts for k in p):
            raise Refused("%s of a state or an input is not affine" % tree[1])
        return {None: FUNCTIONS[tree[1]][1](*[p[None] for p in parts])}
    a, b = affine(tree[1], names, variables), affine(tree[2], names, variables)
    if kind in "+-":
        out = dict(a)
        for k, v in b.items():
            out[k] = (plus if kind == "+" else minus)(out.get(k, Fraction(0)), v)
        return out
    a_free, b_free = set(a) <= {None}, set(b) <= {None}
    if kind == "*" and (a_free or b_free):
        scale, rest = (a, b) if a_free else (b, a)
        return {k: times(v, scale.get(None, Fraction(0))) for k, v in rest.items()}
    if kind == "/" and b_free:
        return {k: over(v, b.get(None, Fraction(0))) for k, v in a.items()}
    if kind == "^" and a_free and b_free:
        return {None: power(a[None], b[None])}
    raise Refused("not affine in states and inputs")


# ---------------------------------------------------------------- the file -> a case
KEYS = {
    "constant": ["value"], "step": ["height", "at"], "ramp": ["slope", "from"],
    "pulse": ["height", "from", "width"], "sine": ["amplitude", "phase"],
    "pulse-train": ["height", "from", "width", "period"], "exponential": ["scale", "rate"],
    "polynomial": ["coefficients"], "held-samples": ["times", "values"], "linear-samples": ["times", "values"],
}
NAME = re.compile(r"[A-Za-z_][A-Za-z0-9_]*\Z")


def allow(table, where, needed, extra=()):
    for k in needed:
        if k not in table:
            raise Refused("%s: %s is missing" % (where, k))
    for k in table:
        if k not in needed and k not in extra:
            raise Refused("%s: unknown key %s" % (where, k))


class Case:
    def __init__(self, path):
        self.name = path.parent.name + "/" + path.stem
        doc = tomllib.loads(path.read_text(encoding="utf-8"))
        allow(doc, "file", ["title", "field", "about", "source", "hard_for", "time", "states", "limits"],
              ["parameters", "inputs", "outputs"])
        if doc["field"] != path.parent.name:
            raise Refused("field is not the folder")
        if not re.fullmatch(r"[a-z0-9]+(-[a-z0-9]+)*", path.stem):
            raise Refused("bad slug")
        taken = set()

        def name(n):
            if not NAME.match(n) or n in taken or n in FUNCTIONS or n in ("t", "pi"):
                raise Refused("bad or repeated name %r" % n)
            taken.add(n)
            return n

        self.parameters = {}
        for n, p in doc.get("parameters", {}).items():
            allow(p, n, ["value", "unit"])
            self.parameters[name(n)] = self.number(p["value"])
        allow(doc["time"], "time", ["unit", "from", "to"], ["least_rows"])
        self.start, self.end = self.number(doc["time"]["from"]), self.number(doc["time"]["to"])
        self.inputs = []
        for table in doc.get("inputs", []):
            shape = table["shape"]
            allow(table, table["name"], ["name", "unit", "shape"] + KEYS[shape],
                  {"sine": ["frequency", "angular_frequency"], "pulse-train": ["count"]}.get(shape, []))
            self.inputs.append(Input(self, name(table["name"]), table))
        for s in doc["states"]:
            allow(s, s["name"], ["name", "unit", "start", "rate"], ["exact"])
            name(s["name"])
        for o in doc.get("outputs", []):
            allow(o, o["name"], ["name", "unit", "value"])
            name(o["name"])
        allow(doc["limits"], "limits", ["absolute", "relative"])
        variables = {s["name"] for s in doc["states"]} | {u.name for u in self.inputs}
        self.states = [s["name"] for s in doc["states"]]
        self.outputs = [o["name"] for o in doc.get("outputs", [])]
        self.begin = [self.number(s["start"]) for s in doc["states"]]
        self.rates = [affine(parse(s["rate"]), self.parameters, variables) for s in doc["states"]]
        self.values = [affine(parse(o["value"]), self.parameters, variables) for o in doc.get("outputs", [])]
        closed = [s.get("exact") for s in doc["states"]]
        if any(closed) and not all(closed):
            raise Refused("closed forms for some states only")
        self.closed = [parse(c) for c in closed] if all(closed) else None

    def number(self, x):
        if isinstance(x, str):
            return evaluate(parse(x), self.parameters)
        return exact_f64(x)

    def instant(self, x):
        x = self.number(x)
        if not isinstance(x, Fraction):
            raise Refused("a jump time must follow from its numbers by + - * / alone")
        return x


class Input:
    """One input: `size` generator states; row `rows`; their values from any segment start."""

    def __init__(self, case, name, table):
        self.name, self.shape = name, table["shape"]
        n, when = case.number, case.instant
        self.jumps = []
        self.rows = [[Fraction(0)]]
        if self.shape == "constant":
            self.v = n(table["value"])
        elif self.shape == "step":
            self.v, self.jumps = n(table["height"]), [when(table["at"])]
        elif self.shape == "ramp":
            self.v, self.jumps = n(table["slope"]), [when(table["from"])]
        elif self.shape == "pulse":
            self.v, a = n(table["height"]), when(table["from"])
            self.pulses = [(a, a + when(table["width"]))]
        elif self.shape == "pulse-train":
            self.v, a = n(table["height"]), when(table["from"])
            width, period = when(table["width"]), when(table["period"])
            if not 0 < width <= period:
                raise Refused("width of a pulse train must lie in (0, period]")
            count = int(n(table["count"])) if "count" in table else None
            self.pulses, k = [], 0
            while (count is None or k < count) and a + k * period <= case.end:
                self.pulses.append((a + k * period, a + k * period + width))
                k += 1
        elif self.shape == "sine":
            if ("frequency" in table) == ("angular_frequency" in table):
                raise Refused("one of frequency and angular_frequency")
            self.v, self.phase = n(table["amplitude"]), n(table["phase"])
            self.w = (times(times(Fraction(2), arb.pi()), n(table["frequency"])) if "frequency" in table
                      else n(table["angular_frequency"]))
            self.rows = [[Fraction(0), self.w], [-self.w, Fraction(0)]]
        elif self.shape == "exponential":
            self.v, self.r = n(table["scale"]), n(table["rate"])
            self.rows = [[self.r]]
        elif self.shape == "polynomial":
            self.c = [n(x) for x in table["coefficients"]]
            self.chain(len(self.c))
        else:
            self.t, self.y = [when(x) for x in table["times"]], [n(x) for x in table["values"]]
            if len(self.t) != len(self.y) or any(a >= b for a, b in zip(self.t, self.t[1:])):
                raise Refused("sample times must rise, one value each")
            self.jumps = list(self.t)
        if self.shape in ("ramp", "linear-samples"):
            self.chain(2)
        if self.shape in ("pulse", "pulse-train"):
            self.jumps = [x for p in self.pulses for x in p]

    def chain(self, size):
        self.rows = [[Fraction(int(j == i + 1)) for j in range(size)] for i in range(size)]

    def at(self, s):
        """Generator states at the start s of a segment (value after a jump)."""
        zero = Fraction(0)
        if self.shape == "constant":
            return [self.v]
        if self.shape == "step":
            return [self.v if s >= self.jumps[0] else zero]
        if self.shape == "ramp":
            return [times(self.v, s - self.jumps[0]), self.v] if s >= self.jumps[0] else [zero, zero]
        if self.shape in ("pulse", "pulse-train"):
            return [self.v if any(a <= s < b for a, b in self.pulses) else zero]
        if self.shape == "sine":
            angle = plus(times(self.w, s), self.phase)
            return [times(self.v, FUNCTIONS["sin"][1](angle)), times(self.v, FUNCTIONS["cos"][1](angle))]
        if self.shape == "exponential":
            return [times(self.v, FUNCTIONS["exp"][1](times(self.r, s)))]
        if self.shape == "polynomial":
            out, c = [], list(self.c)
            while c:
                value = zero
                for x in reversed(c):
                    value = plus(times(value, s), x)
                out.append(value)
                c = [times(Fraction(k), c[k]) for k in range(1, len(c))]
            return out
        before = [k for k, x in enumerate(self.t) if x <= s]
        if self.shape == "held-samples":
            return [self.y[before[-1]] if before else zero]
        if not before:
            return [self.y[0], zero]
        k = before[-1]
        if k == len(self.t) - 1:
            return [self.y[k], zero]
        slope = over(minus(self.y[k + 1], self.y[k]), self.t[k + 1] - self.t[k])
        return [plus(self.y[k], times(slope, s - self.t[k])), slope]


# ---------------------------------------------------------------- the solution, jump to jump
class Solution:
    def __init__(self, case):
        self.case = case
        n = len(case.states)
        self.place, size = {s: i for i, s in enumerate(case.states)}, n
        for u in case.inputs:
            self.place[u.name] = size
            size += len(u.rows)
        self.place[None] = size                       # the constant 1
        size += 1
        m = [[Fraction(0)] * size for _ in range(size)]
        for i, rate in enumerate(case.rates):
            for k, v in rate.items():
                m[i][self.place[k]] = plus(m[i][self.place[k]], v)
        for u in case.inputs:
            o = self.place[u.name]
            for i, row in enumerate(u.rows):
                for j, v in enumerate(row):
                    m[o + i][o + j] = v
        self.m = arb_mat([[ball(v) for v in row] for row in m])
        self.norm = max(sum(abs(float(ball(v).mid())) for v in row) for row in m)
        self.size, self.n, self.cache = size, n, {}
        jumps = sorted({j for u in case.inputs for j in u.jumps if case.start < j < case.end})
        self.jumps = jumps
        self.edges = [case.start] + jumps
        z = self.load([ball(v) for v in case.begin], case.start)
        self.at_edge = [z]
        for a, b in zip(self.edges, self.edges[1:]):
            z = self.move(z, b - a)
            z = self.load(z[:n], b)
            self.at_edge.append(z)

    def load(self, x, s):
        z = list(x)
        for u in self.case.inputs:
            z += [ball(v) for v in u.at(s)]
        return z + [arb(1)]

    def move(self, z, span):
        if span == 0:
            return z
        if span not in self.cache:
            self.cache[span] = (self.m * ball(span)).exp()
        e = self.cache[span] * arb_mat([[v] for v in z])
        return [e[i, 0] for i in range(self.size)]

    def channels(self, t):
        k = max(i for i, s in enumerate(self.edges) if s <= t)
        z = self.move(self.at_edge[k], t - self.edges[k])
        out = z[:self.n]
        for value in self.case.values:
            total = arb(0)
            for name, c in value.items():
                total += ball(c) * z[self.place[name]]
            out.append(total)
        return out


def stamps(case, solution):
    """Binary64 stamps: ends, fractions, early ones down to the fastest rate, around jumps, random."""
    a, b = float(case.start), float(case.end)
    if Fraction(a) != case.start or Fraction(b) != case.end:
        raise Refused("window ends must be binary64 numbers")
    window = b - a
    found = {a, b}
    found.update(a + window * k / 8 for k in range(1, 8))
    low, high = min(0.05 / solution.norm, window / 64), window / 10
    found.update(a + low * (high / low) ** (k / 13) for k in range(14))
    jumps = solution.jumps
    pick = jumps if len(jumps) <= 5 else [jumps[0], jumps[1], jumps[len(jumps) // 2], jumps[-2], jumps[-1]]
    for j in pick:
        f = float(j)
        found.update([math.nextafter(f, -math.inf), f, f + window * 2.0**-20, f - window * 2.0**-12])
    rnd = random.Random("stepgauge " + case.name)
    while len(found) < STAMPS:
        found.add(a + window * rnd.random())
    return sorted(t for t in found if a <= t <= b)


def upper(x):
    return abs(x).upper() if isinstance(x, arb) else abs(ball(x))


def printed(x, where):
    if upper(x) < ball(TINY):
        return "0"
    if not x.rad() <= abs(x).lower() * ball(Fraction(1, 10 ** (DIGITS + 20))):
        raise Refused("%s: the ball is too wide: %s" % (where, x.str(20)))
    return x.str(DIGITS, radius=False)


def process(path, write):
    case = Case(path)
    solution = Solution(case)
    names = case.states + case.outputs
    ts = stamps(case, solution)
    if not 50 <= len(ts) <= 60:
        raise Refused("%d stamps" % len(ts))
    rows = [solution.channels(Fraction(t)) for t in ts]
    peaks = [max(float(abs(r[i]).mid()) for r in rows) for i in range(len(names))]
    worst = arb(0)
    if case.closed:
        for t, row in zip(ts, rows):
            known = dict(case.parameters, t=Fraction(t))
            for i, tree in enumerate(case.closed):
                apart = upper(row[i] - ball(evaluate(tree, known)))
                if not apart <= ball(exact_f64(CLOSED_FORM_TOLERANCE)) * ball(exact_f64(peaks[i])):
                    raise Refused("%s at t = %r: the closed form is off by %s, propagator %s" %
                                  (names[i], t, apart.str(6), row[i].str(20, radius=False)))
                if peaks[i]:
                    worst = max(worst, apart / ball(exact_f64(peaks[i])))
    text = [[printed(v, "%s at %r" % (names[i], t)) for i, v in enumerate(r)] for t, r in zip(ts, rows)]
    if write:
        how = ("enclosed with Arb (python-flint %s) at %d bits from the binary64 numbers of the case; "
               "%d significant digits; 0 stands for magnitudes below 1e-340; %s" %
               (flint.__version__, BITS, DIGITS,
                "the closed forms of the case agree" if case.closed else "the case states no closed form"))
        out = ['{', '"case": %s,' % json.dumps(case.name), '"how": %s,' % json.dumps(how),
               '"channels": %s,' % json.dumps(names), '"peak": %s,' % json.dumps(peaks),
               '"times": [', ",\n".join(json.dumps(t) for t in ts), '],', '"values": [',
               ",\n".join(json.dumps(r, separators=(",", ":")) for r in text), ']', '}']
        target = HERE / (case.name.replace("/", "--") + ".json")
        target.write_text("\n".join(out) + "\n", encoding="utf-8")
    return case, ts, worst, peaks


def main():
    words = [a for a in sys.argv[1:] if not a.startswith("--")]
    write = "--check" not in sys.argv
    count = closed = 0
    for path in sorted(CASES.glob("*/*.toml")):
        name = path.parent.name + "/" + path.stem
        if words and not any(w in name for w in words):
            continue
        try:
            case, ts, worst, peaks = process(path, write)
        except (Refused, KeyError, tomllib.TOMLDecodeError) as e:
            sys.exit("%s: %s" % (name, e))
        count += 1
        closed += bool(case.closed)
        print("%-34s %2d states %2d outputs %2d stamps  %-30s peaks %s" % (
            name, len(case.states), len(case.outputs), len(ts),
            "closed form within " + worst.str(2, radius=False) if case.closed else "no closed form",
            " ".join("%.3g" % p for p in peaks[:6])), flush=True)
    print("%d cases, %d with closed forms" % (count, closed))


if __name__ == "__main__":
    main()
