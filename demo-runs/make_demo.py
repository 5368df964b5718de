#!/usr/bin/env python3
"""Makes the demo of stepgauge: the files of three simulators, and what they claim.

The energy team of a small shipyard fits out a hybrid ferry. Three simulators were
written in house (alder, birch, cedar), and four linear models of the ship serve to
compare them: cold room, bus filter, battery room, winch. Some of the submissions are
sound; some are wrong on purpose and carry `expect = "fail"` or `expect = "undecided"`.

The models come from `stepgauge case NAME --json`; the integrators below know nothing of
the exact solutions. Everything is written next to this script, the same bytes each time:

    python3 demo-runs/make_demo.py              # finds target/*/stepgauge, else the PATH
    python3 demo-runs/make_demo.py PATH/TO/stepgauge
    stepgauge audit demo-runs                   # must end with status 0

Python 3.8 or later, standard library only.
"""

import json
import math
import pathlib
import shutil
import subprocess
import sys

HERE = pathlib.Path(__file__).resolve().parent


# --- models -----------------------------------------------------------------------------


def find_stepgauge():
    if len(sys.argv) > 1:
        return sys.argv[1]
    for kind in ("release", "debug"):
        built = HERE.parent / "target" / kind / "stepgauge"
        if built.exists():
            return str(built)
    found = shutil.which("stepgauge")
    if not found:
        sys.exit("make_demo.py: build stepgauge first, or give the path of the program")
    return found


class Model:
    """x' = A x + B u(t) + constant, over the window of a case."""

    def __init__(self, stepgauge, name):
        text = subprocess.run(
            [stepgauge, "case", name, "--json"], check=True, stdout=subprocess.PIPE
        ).stdout
        case = json.loads(text)
        self.A, self.B, self.constant = case["A"], case["B"], case["constant"]
        self.start = [state["start"] for state in case["states"]]
        self.inputs = case["inputs"]
        self.begin, self.end = case["time"]["from"], case["time"]["to"]

    def inputs_at(self, t, h, part, last_stage="old value"):
        """Inputs at `t + part*h` as the step from `t` to `t + h` sees them.

        A jump on the grid belongs to the step that begins there: at the end of a step
        the value before the jump holds, unless the caller asks for the new one.
        """
        s = t + part * h
        inside = min(max(part, 1e-6), 1 - 1e-6)
        if part == 1 and last_stage == "new value":
            inside = 1 + 1e-6
        return [shape(one, s, t + inside * h) for one in self.inputs]

    def rate(self, x, u):
        return [
            dot(row, x) + dot(gains, u) + c
            for row, gains, c in zip(self.A, self.B, self.constant)
        ]


def shape(one, s, inside):
    """One input at time `s`; shapes that jump look at `inside` instead."""
    kind = one["shape"]
    if kind == "constant":
        return one["value"]
    if kind == "ramp":
        return one["slope"] * max(s - one["from"], 0.0)
    since = inside - one["from"]
    if kind == "pulse-train" and since > 0:
        count = math.floor(since / one["period"])
        if count >= one.get("count", math.inf):
            return 0.0
        since -= count * one["period"]
    elif kind not in ("pulse", "pulse-train"):
        raise ValueError(f"no input of shape {kind} is needed here")
    return one["height"] if 0 <= since < one["width"] else 0.0


# --- integrators ------------------------------------------------------------------------


def dot(a, b):
    return sum(p * q for p, q in zip(a, b))


def moved(x, h, slope):
    return [p + h * q for p, q in zip(x, slope)]


def solve(matrix, right):
    """Gaussian elimination with row exchange."""
    rows = [row[:] + [r] for row, r in zip(matrix, right)]
    n = len(rows)
    for i in range(n):
        pivot = max(range(i, n), key=lambda k: abs(rows[k][i]))
        rows[i], rows[pivot] = rows[pivot], rows[i]
        for k in range(i + 1, n):
            factor = rows[k][i] / rows[i][i]
            rows[k] = [p - factor * q for p, q in zip(rows[k], rows[i])]
    x = [0.0] * n
    for i in reversed(range(n)):
        x[i] = (rows[i][n] - dot(rows[i][i + 1 : n], x[i + 1 :])) / rows[i][i]
    return x


def implicit_part(model, h):
    """The matrix 1 - h A."""
    return [
        [(i == j) - h * a for j, a in enumerate(row)] for i, row in enumerate(model.A)
    ]


def forward_euler(model, x, t, h):
    return moved(x, h, model.rate(x, model.inputs_at(t, h, 0)))


def heun(model, x, t, h):
    k1 = model.rate(x, model.inputs_at(t, h, 0))
    k2 = model.rate(moved(x, h, k1), model.inputs_at(t, h, 1))
    return [a + h / 2 * (p + q) for a, p, q in zip(x, k1, k2)]


def rk4(model, x, t, h, held=False, last_stage="old value"):
    """The classical method; `held` and `last_stage` make the two slips of the demo."""
    start = model.inputs_at(t, h, 0)
    middle = start if held else model.inputs_at(t, h, 0.5)
    end = start if held else model.inputs_at(t, h, 1, last_stage)
    k1 = model.rate(x, start)
    k2 = model.rate(moved(x, h / 2, k1), middle)
    k3 = model.rate(moved(x, h / 2, k2), middle)
    k4 = model.rate(moved(x, h, k3), end)
    return [
        a + h / 6 * (p + 2 * q + 2 * r + s)
        for a, p, q, r, s in zip(x, k1, k2, k3, k4)
    ]


def rk4_held_input(model, x, t, h):
    return rk4(model, x, t, h, held=True)


def rk4_early_load(model, x, t, h):
    return rk4(model, x, t, h, last_stage="new value")


def backward_euler(model, x, t, h):
    u = model.inputs_at(t, h, 1)
    forced = [dot(g, u) + c for g, c in zip(model.B, model.constant)]
    return solve(implicit_part(model, h), moved(x, h, forced))


def trapezoidal(model, x, t, h):
    u = model.inputs_at(t, h, 1)
    forced = [dot(g, u) + c for g, c in zip(model.B, model.constant)]
    half = moved(x, h / 2, model.rate(x, model.inputs_at(t, h, 0)))
    return solve(implicit_part(model, h / 2), moved(half, h / 2, forced))


def exponential(matrix):
    """E = exp(M) - 1: Taylor series of the matrix halved ten times, then doubled again.

    The identity is kept apart, so that the doublings lose no digits:
    exp(2 M) - 1 = 2 E + E E.
    """
    halvings = 10
    small = [[a / 2**halvings for a in row] for row in matrix]
    power, rest = small, [row[:] for row in small]
    for k in range(2, 16):
        power = [[c / k for c in row] for row in times(power, small)]
        rest = [[p + q for p, q in zip(a, b)] for a, b in zip(rest, power)]
    for _ in range(halvings):
        square = times(rest, rest)
        rest = [[2 * p + q for p, q in zip(a, b)] for a, b in zip(rest, square)]
    return rest


def times(a, b):
    columns = list(zip(*b))
    return [[math.fsum(p * q for p, q in zip(row, column)) for column in columns] for row in a]


def exact_steps(model, h):
    """A stepper without truncation error for inputs that are constant over a step.

    State, inputs and a one for the constant follow one linear system; its exponential
    takes them over the step.
    """
    states, inputs = len(model.A), len(model.inputs)
    rows = [a + b + [c] for a, b, c in zip(model.A, model.B, model.constant)]
    rows += [[0.0] * (states + inputs + 1)] * (inputs + 1)
    growth = exponential([[h * a for a in row] for row in rows])

    def step(model, x, t, h):
        z = x + model.inputs_at(t, h, 0) + [1.0]
        return [math.fsum([a] + [p * q for p, q in zip(row, z)]) for a, row in zip(x, growth)]

    return step


def run(model, step, h):
    """Rows (t, x): time is a multiple of the step, never a sum."""
    if step is exact_steps:
        step = exact_steps(model, h)
    count = round((model.end - model.begin) / h)
    x = list(model.start)
    rows = [(model.begin, x)]
    for k in range(count):
        x = step(model, x, model.begin + k * h, h)
        rows.append((model.begin + (k + 1) * h, x))
    return rows


# --- files ------------------------------------------------------------------------------


def table(rows, head, separator, number, time="%.10g", decimal=".", end="\n"):
    lines = list(head)
    for t, x in rows:
        fields = [time % t] + [number % value for value in x]
        lines.append(separator.join(field.replace(".", decimal) for field in fields))
    return "".join(line + end for line in lines)


def write(folder, name, text):
    path = HERE / folder / name
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(text.encode("utf-8"))


def submission(folder, text, runs):
    """`text` is all of submission.toml but the runs: (file, step) each, finest first."""
    entries = "".join(f'\n[[runs]]\nfile = "{file}"\nstep = {step:.10g}\n' for file, step in runs)
    write(folder, "submission.toml", text.lstrip("\n") + entries)


def kelvin(rows):
    return [(t, [value + 273.15 for value in x]) for t, x in rows]


def scaled_time(rows, factor):
    return [(t * factor, x) for t, x in rows]


# --- the cold room ----------------------------------------------------------------------


def cold_room(stepgauge):
    model = Model(stepgauge, "thermal/cold-room-defrost")

    folder, runs = "cold-room/alder", []
    for h in (10, 20, 30, 60):
        text = table(run(model, forward_euler, h), ["t,air,wall"], ",", "%.7f")
        write(folder, f"h{h}.csv", text)
        runs.append((f"h{h}.csv", h))
    submission(
        folder,
        """
# A clean pass at order 1: forward Euler on four steps, on each of which the defrost
# pulse begins and ends at a grid point. The plainest layout: names of the case, commas.
case     = "thermal/cold-room-defrost"
producer = "alder 2.3"

[claims]
method = "forward Euler"
order  = 1

[limits]
absolute = 0.05
relative = 0
""",
        runs,
    )

    folder, runs = "cold-room/birch", []
    head = ['"time [min]";"room air, sensor 1 [K]";"wall, sensor 2 [K]"']
    for h in (15, 30, 60, 150):
        rows = scaled_time(kelvin(run(model, heun, h)), 1 / 60)
        write(folder, f"defrost_{h}.txt", table(rows, head, ";", "%.7f", "%.3f", ","))
        runs.append((f"defrost_{h}.txt", h))
    submission(
        folder,
        """
# A clean pass at order 2 in another dress: minutes, kelvin, semicolons, decimal comma,
# quoted names. The units stand in the header; only the columns had to be named.
case     = "thermal/cold-room-defrost"
producer = "birch 0.9"

[claims]
method = "Heun"
order  = 2

[limits]
absolute = 0.002
relative = 0

[columns]
time = "time"
air  = "room air, sensor 1"
wall = "wall, sensor 2"
""",
        runs,
    )

    folder, runs = "cold-room/cedar", []
    slipped = Model(stepgauge, "thermal/cold-room-defrost")
    slipped.inputs[0]["height"] /= 1000  # kilowatt where watt is meant
    for h in (30, 60, 100, 150):
        text = table(run(slipped, rk4, h), ["t,air,wall"], ",", "%.9f", end="\r\n")
        write(folder, f"run-{h}s.csv", text)
        runs.append((f"run-{h}s.csv", h))
    submission(
        folder,
        """
# A control: the heater of 500 W was entered as 0.5 (kilowatt), so the air stays cold.
# The error is the same at every step: no finer one helps. Lines end with CR LF.
case     = "thermal/cold-room-defrost"
producer = "cedar 4"
expect   = "fail"

[claims]
method = "classical RK4"
order  = 4

[limits]
absolute = 0.01
relative = 0
""",
        runs,
    )


# --- the bus filter ---------------------------------------------------------------------


def bus_filter(stepgauge):
    model = Model(stepgauge, "electrical/lc-bus-filter")
    steps = (0.1, 0.125, 0.2, 0.25)

    folder, runs = "bus-filter/alder", []
    for h in steps:
        name = f"bus_{h * 1000:.0f}us.tsv"
        text = table(run(model, rk4, h), ["t\ti_l\tv_bus"], "\t", "%.9g")
        write(folder, name, text)
        runs.append((name, h))
    submission(
        folder,
        """
# A clean pass at order 4: classical RK4 on a lightly damped filter, tabs, nine
# significant digits. The current swings through zero, so its limit follows the peak.
case     = "electrical/lc-bus-filter"
producer = "alder 2.3"

[claims]
method = "classical RK4"
order  = 4

[limits]
absolute    = 0
relative    = 2e-4
relative_to = "peak"
""",
        runs,
    )

    folder, runs = "bus-filter/birch", []
    for h in (0.2, 0.25, 0.5, 1):
        name = f"exact_{h * 1000:.0f}us.csv"
        text = table(run(model, exact_steps, h), ["t,i_l,v_bus"], ",", "%.17g")
        write(folder, name, text)
        runs.append((name, h))
    submission(
        folder,
        """
# Exact for this case: the load is constant over every step, and the propagator of the
# augmented matrix makes no truncation error. All that is left is rounding, 17 digits.
case     = "electrical/lc-bus-filter"
producer = "birch 0.9"

[claims]
method = "exponential Euler"

[limits]
absolute = 1e-9
relative = 0
""",
        runs,
    )

    folder, runs = "bus-filter/cedar", []
    for h in steps:
        name = f"bus_{h * 1000:.0f}us.tsv"
        text = table(run(model, rk4_early_load, h), ["t\ti_l\tv_bus"], "\t", "%.9g")
        write(folder, name, text)
        runs.append((name, h))
    submission(
        folder,
        """
# A control: the same method and steps as alder's, but the last stage of a step that
# ends at a jump already sees the new load. Order 4 is claimed, order 1 is left.
case     = "electrical/lc-bus-filter"
producer = "cedar 4"
expect   = "fail"

[claims]
method = "classical RK4"
order  = 4

[limits]
absolute    = 0
relative    = 2e-4
relative_to = "peak"
""",
        runs,
    )


# --- the battery room -------------------------------------------------------------------


def battery_room(stepgauge):
    model = Model(stepgauge, "thermal/battery-room")
    steps = (0.0125, 0.025, 0.05, 0.125)

    folder, runs = "battery-room/alder", []
    for h in steps:
        name = f"be_{h * 3600:.0f}s.dat"
        text = table(run(model, backward_euler, h), ["% t cells room"], "  ", "%9.6f", "%7.4f")
        write(folder, name, text)
        runs.append((name, h))
    submission(
        folder,
        """
# A control: the release notes say that alder steps by the trapezoidal rule, but these
# rows are those of backward Euler, too coarse for a limit of 10 mK at every step here.
case     = "thermal/battery-room"
producer = "alder 2.3"
expect   = "fail"

[claims]
method = "trapezoidal"

[limits]
absolute = 0.01
relative = 0
""",
        runs,
    )

    folder, runs = "battery-room/birch", []
    for h in steps:
        name = f"room-{h * 3600:.0f}s.csv"
        head = [f"birch 0.9, battery room, step {h * 60:g} min", "t (min);cells (K);room (K)"]
        rows = scaled_time(kelvin(run(model, trapezoidal, h)), 60)
        write(folder, name, table(rows, head, ";", "%.8f", "%.2f", ","))
        runs.append((name, h))
    submission(
        folder,
        """
# A clean pass at order 2: the trapezoidal rule, with a title above the header, minutes,
# kelvin and a decimal comma. Nothing needs to be stated: the header says it all.
case     = "thermal/battery-room"
producer = "birch 0.9"

[claims]
method = "trapezoidal"
order  = 2

[limits]
absolute = 0.005
relative = 0
""",
        runs,
    )

    folder, runs = "battery-room/cedar", []
    steps = (0.01, 0.0125, 0.025, 0.05)
    for h in steps:
        name = f"cedar-{h * 3600:.0f}s.csv"
        text = table(run(model, rk4, h), ["t,cells,room"], ",", "%.10f")
        if h == steps[0]:
            text = text[: len(text) // 2]  # the disk was full
        write(folder, name, text)
        runs.append((name, h))
    submission(
        folder,
        """
# A control: the values are right, but the finest file ends half-way through the window,
# in the middle of a line. What is not there cannot pass.
case     = "thermal/battery-room"
producer = "cedar 4"
expect   = "fail"

[claims]
method = "classical RK4"
order  = 4
""",
        runs,
    )


# --- the winch --------------------------------------------------------------------------


def winch(stepgauge):
    model = Model(stepgauge, "mechanical/winch-ramp")
    steps = (0.02, 0.05, 0.1, 0.2)

    folder, runs = "winch/alder", []
    for h in steps:
        name = f"winch_{h * 1000:.0f}ms.csv"
        text = table(run(model, rk4, h), ["time/s,drum,rope"], ",", "%.3f")
        write(folder, name, text)
        runs.append((name, h))
    submission(
        folder,
        """
# Undecided: the method may well keep the limit and its order, but three decimals cannot
# show it. What cannot be seen neither passes nor fails; more digits would settle it.
case     = "mechanical/winch-ramp"
producer = "alder 2.3"
expect   = "undecided"

[claims]
method = "classical RK4"
order  = 4

[columns]
time  = { column = "time/s", unit = "s" }
speed = "drum"
rope  = { column = 3, unit = "m" }
""",
        runs,
    )

    layout = ["# birch 0.9, winch drive under a rising command", "# t speed rope"]
    folder, runs = "winch/birch", []
    for h in steps:
        name = f"winch_{h * 1000:.0f}ms.out"
        text = table(run(model, rk4, h), layout, " ", "%19.12e", "%5.2f")
        write(folder, name, text)
        runs.append((name, h))
    submission(
        folder,
        """
# A clean pass at order 4: classical RK4, fixed width with blanks, the header in a
# comment, numbers with exponents.
case     = "mechanical/winch-ramp"
producer = "birch 0.9"

[claims]
method = "classical RK4"
order  = 4
""",
        runs,
    )

    folder, runs = "winch/cedar", []
    for h in steps:
        name = f"winch_{h * 1000:.0f}ms.csv"
        text = table(run(model, rk4_held_input, h), ["t,speed,rope"], ",", "%.12g")
        write(folder, name, text)
        runs.append((name, h))
    submission(
        folder,
        """
# A control: the same steps as birch's, but the command is held from the start of each
# step, though it rises all the while. Order 4 is claimed, order 1 is left.
case     = "mechanical/winch-ramp"
producer = "cedar 4"
expect   = "fail"

[claims]
method = "classical RK4"
order  = 4
""",
        runs,
    )


def main():
    stepgauge = find_stepgauge()
    for topic in (cold_room, bus_filter, battery_room, winch):
        topic(stepgauge)
    files = [path for path in HERE.rglob("*") if path.is_file()]
    size = sum(path.stat().st_size for path in files)
    print(f"{len(files)} files, {size / 1e6:.2f} MB below {HERE}")


if __name__ == "__main__":
    main()
