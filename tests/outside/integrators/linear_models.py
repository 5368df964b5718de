#!/usr/bin/env python3
"""Turn the case files under cases/ into plain numbers, exactly (fractions) or as text for the integrators' scripts.

Makes:  python linear_models.py --write DIR     DIR/<slug>.model for each case, read by make_*.{py,c,cpp,m,R}
        python linear_models.py --merge DIR     runs/manifest.json from the parts DIR/*.jsonl that those scripts leave
Needs:  Python 3.11 (tomllib), nothing else.

A number of a case file is the binary64 nearest to its decimals; everything derived from it is a fraction, without
rounding.  A .model file holds, one number a line, each rounded once to binary64:
n, to, A (n*n by rows), constant part (n; constant inputs are in it), start (n),
sine: amplitude, angular frequency, phase, its column (n);  pulse: height, from, until, its column (n).
"""
import json
import math
import sys
import tomllib
from fractions import Fraction
from pathlib import Path

HERE = Path(__file__).resolve().parent


class Affine:
    """A constant plus a coefficient for each name; products of two names are refused."""

    def __init__(self, constant=0, parts=None):
        self.constant = Fraction(constant)
        self.parts = {k: v for k, v in (parts or {}).items() if v}

    @staticmethod
    def of(x):
        return x if isinstance(x, Affine) else Affine(Fraction(x))

    def __add__(self, other):
        other = Affine.of(other)
        names = {**self.parts, **other.parts}
        return Affine(self.constant + other.constant,
                      {k: self.parts.get(k, 0) + other.parts.get(k, 0) for k in names})

    def __mul__(self, other):
        other = Affine.of(other)
        if self.parts and other.parts:
            raise ValueError("not affine")
        a, b = (self, other) if self.parts else (other, self)
        return Affine(a.constant * b.constant, {k: v * b.constant for k, v in a.parts.items()})

    def __truediv__(self, other):
        other = Affine.of(other)
        if other.parts:
            raise ValueError("not affine")
        return self * (1 / other.constant)

    def __pow__(self, n):
        if self.parts:
            raise ValueError("not affine")
        return Affine(self.constant ** int(Affine.of(n).constant))

    def __neg__(self):
        return self * -1

    def __sub__(self, other):
        return self + -Affine.of(other)

    __radd__, __rmul__ = __add__, __mul__

    def __rsub__(self, other):
        return Affine.of(other) - self

    def __rtruediv__(self, other):
        return Affine.of(other) / self


def value(formula, names):
    if isinstance(formula, (int, float)):
        return Affine(Fraction(formula))
    return Affine.of(eval(formula.replace("^", "**"), {"__builtins__": {}}, names))


def load(path):
    """A case file -> dict with exact fractions: A, constant, start, sine, pulse, time_from, time_to, names."""
    raw = tomllib.loads(Path(path).read_text())
    parameters = {}
    for name, p in raw["parameters"].items():
        parameters[name] = value(p["value"], parameters)
    states = [s["name"] for s in raw["states"]]
    inputs = {i["name"]: i for i in raw.get("inputs", [])}
    names = dict(parameters)
    names.update({s: Affine(0, {s: Fraction(1)}) for s in [*states, *inputs]})
    rates = [value(s["rate"], names) for s in raw["states"]]
    n = len(states)
    model = dict(slug=Path(path).stem, names=states, parameters={k: v.constant for k, v in parameters.items()},
                 time_from=Fraction(raw["time"]["from"]), time_to=Fraction(raw["time"]["to"]),
                 start=[value(s["start"], parameters).constant for s in raw["states"]],
                 A=[[r.parts.get(s, Fraction(0)) for s in states] for r in rates],
                 constant=[r.constant for r in rates], sine=None, pulse=None)
    for name, i in inputs.items():
        column = [r.parts.get(name, Fraction(0)) for r in rates]
        number = lambda key: value(i[key], parameters).constant
        if i["shape"] == "constant":
            model["constant"] = [c + b * number("value") for c, b in zip(model["constant"], column)]
        elif i["shape"] == "sine":
            model["sine"] = (number("amplitude"), number("angular_frequency"), number("phase"), column)
        elif i["shape"] == "pulse":
            model["pulse"] = (number("height"), number("from"), number("from") + number("width"), column)
        else:
            raise ValueError(i["shape"])
    assert len(states) == n and model["time_from"] == 0
    return model


def all_models():
    return {p.stem: load(p) for p in sorted((HERE / "cases/outside").glob("*.toml"))}


def write(folder):
    for slug, m in all_models().items():
        n = len(m["names"])
        none = (0, 0, 0, [0] * n)
        numbers = [n, m["time_to"], *[a for row in m["A"] for a in row], *m["constant"], *m["start"]]
        for a, b, c, column in (m["sine"] or none, m["pulse"] or none):
            numbers += [a, b, c, *column]
        Path(folder, slug + ".model").write_text("".join("%.17g\n" % float(x) for x in numbers))
        Path(folder, slug + ".names").write_text(",".join(m["names"]) + "\n")


def read(folder, slug):
    """A .model file back as floats, for the Python scripts."""
    x = [float(s) for s in Path(folder, slug + ".model").read_text().split()]
    n = int(x[0])
    take = iter(x[2:])
    some = lambda k: [next(take) for _ in range(k)]
    m = dict(slug=slug, n=n, to=x[1], A=[some(n) for _ in range(n)], constant=some(n), start=some(n))
    m["sine"] = (*some(3), some(n))
    m["pulse"] = (*some(3), some(n))
    assert next(take, None) is None
    return m


KEYS = ["file", "case", "library", "library_version", "method", "order", "kind", "step", "tolerance",
        "digits_format", "ladder"]


def merge(folder):
    entries = []
    for part in sorted(Path(folder).glob("*.jsonl")):
        for line in part.read_text().splitlines():
            e = json.loads(line)
            assert list(e) == KEYS, (part, list(e))
            assert (HERE / "runs" / e["file"]).is_file(), e["file"]
            assert e["step"] is None or math.isfinite(e["step"])
            entries.append(e)
    listed = [e["file"] for e in entries]
    assert len(set(listed)) == len(listed)
    left = {p.name for p in (HERE / "runs").glob("*.csv")} - set(listed)
    assert not left, f"not in the manifest: {left}"
    entries.sort(key=lambda e: e["file"])
    text = "[\n" + ",\n".join(" " + json.dumps(e) for e in entries) + "\n]\n"
    (HERE / "runs/manifest.json").write_text(text)
    print(len(entries), "files in the manifest")


if __name__ == "__main__":
    {"--write": write, "--merge": merge}[sys.argv[1]](sys.argv[2])
