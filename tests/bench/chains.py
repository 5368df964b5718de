"""Chains of cooling nodes of any length, as in chain.toml: the case file, a long trajectory, submissions.

Everything is the same in every run. Exact values come from the modes of the chain, those of submissions from
the methods that they claim.
"""
import os

import numpy as np

SPAN, HEAT, G_OUT, T_OUT = 86400.0, 15.0, 0.2, 30.0
CAPACITIES, CONDUCTANCES, STARTS = [900.0, 1500.0, 2400.0, 4000.0], [0.8, 0.5, 0.3], [4.0, 5.0, 6.0, 8.0]
BLOCK = 100_000
# What a simulator of fine steps would leave, in kelvin; the limits of the chains are near 1e-6 and above.
ERROR = 1e-9
RUNS_OF_ONE, ROWS = 4, 200
METHODS = [("classical RK4", 4), ("Heun", 2), ("trapezoidal", 2)]


def cyclic(values, length):
    return np.array([values[k % len(values)] for k in range(length)])


def case(length):
    """The case as a file; its name is bench/chain-LENGTH where the file is chain-LENGTH.toml."""
    capacities, starts = cyclic(CAPACITIES, length), cyclic(STARTS, length)
    conductances = cyclic(CONDUCTANCES, length - 1)
    text = f'title = "Cooling chain of {length}"\nfield = "bench"\nsource = "ours"\n'
    text += 'about = "Heat capacities in a row, heated at one end, cooled at the other."\n\n[parameters]\n'
    text += "".join(f'C_{k + 1} = {{ value = {c}, unit = "J/K" }}\n' for k, c in enumerate(capacities))
    text += "".join(f'G_{k + 1} = {{ value = {g}, unit = "W/K" }}\n' for k, g in enumerate(conductances))
    text += f'G_o = {{ value = {G_OUT}, unit = "W/K" }}\nT_o = {{ value = {T_OUT}, unit = "degC" }}\n'
    text += f'heat = {{ value = {HEAT}, unit = "W" }}\n\n[time]\nunit = "s"\nfrom = 0\nto = {SPAN}\n'
    for k in range(1, length + 1):
        gained = "heat" if k == 1 else f"G_{k - 1}*(T{k - 1} - T{k})"
        lost = f"G_o*(T{k} - T_o)" if k == length else f"G_{k}*(T{k} - T{k + 1})"
        text += f'\n[[states]]\nname = "T{k}"\nunit = "degC"\nstart = "{starts[k - 1]}"\n'
        text += f'rate = "({gained} - {lost})/C_{k}"\n'
    return text + "\n[limits]\nabsolute = 1e-6\nrelative = 1e-6\n"


def model(length):
    """A, b and the start of x' = A x + b, and the capacities, which make A symmetric."""
    capacities, laplacian = cyclic(CAPACITIES, length), np.zeros((length, length))
    for k, g in enumerate(cyclic(CONDUCTANCES, length - 1)):
        laplacian[k:k + 2, k:k + 2] += [[-g, g], [g, -g]]
    laplacian[-1, -1] -= G_OUT
    b = np.zeros(length)
    b[0] += HEAT / capacities[0]
    b[-1] += G_OUT * T_OUT / capacities[-1]
    return laplacian / capacities[:, None], b, cyclic(STARTS, length), capacities


def header(length):
    return "t," + ",".join(f"T{k + 1}" for k in range(length)) + "\n"


def write(path, steps, digits=17, length=4, scattered=False, error=ERROR):
    """One row for each of so many steps over the window, and one at its start."""
    a, b, start, capacities = model(length)
    root = np.sqrt(capacities)
    rates, modes = np.linalg.eigh(a * root[:, None] / root)
    rest = -np.linalg.solve(a, b)
    shares = (modes / root[:, None]) * (modes.T @ (root * (start - rest)))
    chance, form = np.random.default_rng(7), ",".join([f"%.{digits}g"] * (length + 1))
    with open(path, "w") as file:
        file.write(header(length))
        for first in range(0, steps + 1, BLOCK):
            place = np.arange(first, min(first + BLOCK, steps + 1), dtype=float)
            if scattered:
                inner = (place > 0) & (place < steps)
                place += inner * 0.8 * (chance.random(place.size) - 0.5)
            times = place * (SPAN / steps)
            wave = np.sin(np.add.outer(np.arange(first, first + times.size) / 139.0, np.arange(length)))
            values = rest + np.exp(np.outer(times, rates)) @ shares.T + error * wave
            np.savetxt(file, np.column_stack([times, values]), fmt=form)


def stepper(method, a, b):
    """From a state and a step to the next state."""
    def rate(x):
        return a @ x + b

    def rk4(x, h):
        k1 = rate(x)
        k2 = rate(x + h / 2 * k1)
        k3 = rate(x + h / 2 * k2)
        return x + h / 6 * (k1 + 2 * k2 + 2 * k3 + rate(x + h * k3))

    def heun(x, h):
        k1 = rate(x)
        return x + h / 2 * (k1 + rate(x + h * k1))

    def trapezoidal(x, h):
        return x + np.linalg.solve(np.eye(len(x)) - h / 2 * a, h * rate(x))

    return {"classical RK4": rk4, "Heun": heun, "trapezoidal": trapezoidal}[method]


def rows(length, method, times):
    a, b, x, _ = model(length)
    step = stepper(method, a, b)
    lines = [header(length)]
    for before, time in zip([0.0, *times], times):
        x = step(x, time - before) if time > before else x
        lines.append(",".join("%.17g" % number for number in [time, *x]) + "\n")
    return "".join(lines)


def submissions(folder, runs, kind):
    """Ladders of four runs of 200 rows on the average, with claims that are true.

    Their steps are `shared` by all, `own` of each submission, or `varied` from row to row.
    """
    written = {}
    for first in range(0, runs, RUNS_OF_ONE):
        number = first // RUNS_OF_ONE
        place = f"{folder}/producer-{number:05}"
        os.makedirs(place)
        length, (method, order) = [1, 4][number % 2], METHODS[number % len(METHODS)]
        text = f'case = "bench/chain-{length}"\n[claims]\nmethod = "{method}"\norder = {order}\n'
        text += '[limits]\nabsolute = 0\nrelative = 1\nrelative_to = "peak"\n'
        for rung, quarters in enumerate([6, 5, 3, 2][:runs - first]):
            steps = (ROWS - 50 + 7 * number % 101 if kind == "own" else ROWS) * quarters // 4
            seed = number % 8 if kind == "varied" else None
            key = (length, method, steps, seed)
            if key not in written:
                share = np.arange(steps + 1) / steps
                if seed is not None:
                    chance = np.random.default_rng(seed).random(steps + 1) * (share > 0) * (share < 1)
                    share = share - 0.06 * np.sin(2 * np.pi * share) * (share < 1) + 0.3 * chance / steps
                written[key] = rows(length, method, [float(time) for time in share * SPAN])
            with open(f"{place}/{rung}.csv", "w") as file:
                file.write(written[key])
            step = SPAN / steps
            setting = f"step = {step!r}" if seed is None else f"tolerance = {step ** order!r}"
            text += f'[[runs]]\nfile = "{rung}.csv"\n{setting}\n'
        with open(f"{place}/submission.toml", "w") as file:
            file.write(text)
