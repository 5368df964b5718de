"""A small time-stepping simulator, as `stepgauge drive` starts it: fixed step, three explicit methods.

    alder.py --method NAME --case CASE.json --step H --output FILE.csv

CASE.json is what `stepgauge case NAME --json` writes. NAME is euler, heun or rk4. The file has a
row for each step, states and outputs in all their digits.
"""

import argparse
import json
import math


class Inputs:
    """The inputs over time. At a jump there are two values: the one before it, which a step that
    ends there still sees, and the one after it, which counts in the rows (`t >= at`)."""

    def __init__(self, inputs, nearby):
        self.inputs = inputs
        # Nodes are multiples of the step: rounding must not move a jump by one of them.
        self.nearby = nearby

    def at(self, t, before):
        return [self.value(one, t, before) for one in self.inputs]

    def reached(self, t, at, before):
        if abs(t - at) <= self.nearby:
            return not before
        return t > at

    def value(self, one, t, before):
        shape = one["shape"]
        if shape == "constant":
            return one["value"]
        if shape == "step":
            return one["height"] if self.reached(t, one["at"], before) else 0.0
        if shape == "ramp":
            return one["slope"] * max(t - one["from"], 0.0)
        if shape == "pulse":
            on = self.reached(t, one["from"], before)
            off = self.reached(t, one["from"] + one["width"], before)
            return one["height"] if on and not off else 0.0
        if shape == "pulse-train":
            return self.train(one, t, before)
        if shape == "sine":
            return one["amplitude"] * math.sin(one["angular_frequency"] * t + one["phase"])
        if shape == "exponential":
            return one["scale"] * math.exp(one["rate"] * t)
        if shape == "polynomial":
            value = 0.0
            for coefficient in reversed(one["coefficients"]):
                value = value * t + coefficient
            return value
        if shape == "held-samples":
            value = 0.0
            for at, sample in zip(one["times"], one["values"]):
                if self.reached(t, at, before):
                    value = sample
            return value
        if shape == "linear-samples":
            return linear(one["times"], one["values"], t)
        raise SystemExit(f"input {one['name']}: shape {shape} is not known")

    def train(self, one, t, before):
        """Pulses one period apart; without `count` they never end."""
        nearest = math.floor((t - one["from"]) / one["period"] + 0.5)
        for number in (nearest - 1, nearest):
            if number < 0 or number >= one.get("count", math.inf):
                continue
            start = one["from"] + number * one["period"]
            on = self.reached(t, start, before)
            if on and not self.reached(t, start + one["width"], before):
                return one["height"]
        return 0.0


def linear(times, values, t):
    """Straight lines between the samples, the nearest sample outside."""
    if t <= times[0]:
        return values[0]
    for left in range(len(times) - 1):
        if t <= times[left + 1]:
            share = (t - times[left]) / (times[left + 1] - times[left])
            return values[left] + share * (values[left + 1] - values[left])
    return values[-1]


def times(matrix, vector):
    return [math.fsum(a * x for a, x in zip(row, vector)) for row in matrix]


class Model:
    def __init__(self, case, step):
        self.A, self.B, self.constant = case["A"], case["B"], case["constant"]
        self.inputs = Inputs(case["inputs"], 1e-6 * step)
        self.outputs = case["outputs"]

    def rate(self, t, x, before):
        u = self.inputs.at(t, before)
        return [sum(row) for row in zip(times(self.A, x), times(self.B, u), self.constant)]

    def output(self, t, x):
        u = self.inputs.at(t, False)
        values = []
        for one in self.outputs:
            terms = [c * v for c, v in zip(one["C"], x)] + [d * v for d, v in zip(one["D"], u)]
            values.append(math.fsum(terms + [one["constant"]]))
        return values


def along(x, h, k):
    return [value + h * slope for value, slope in zip(x, k)]


def euler(model, t, x, h):
    return along(x, h, model.rate(t, x, False))


def heun(model, t, x, h):
    first = model.rate(t, x, False)
    second = model.rate(t + h, along(x, h, first), True)
    return along(x, h / 2, [a + b for a, b in zip(first, second)])


def rk4(model, t, x, h):
    first = model.rate(t, x, False)
    second = model.rate(t + h / 2, along(x, h / 2, first), False)
    third = model.rate(t + h / 2, along(x, h / 2, second), False)
    fourth = model.rate(t + h, along(x, h, third), True)
    slopes = [a + 2 * b + 2 * c + d for a, b, c, d in zip(first, second, third, fourth)]
    return along(x, h / 6, slopes)


METHODS = {"euler": euler, "heun": heun, "rk4": rk4}


def main():
    arguments = argparse.ArgumentParser()
    arguments.add_argument("--method", choices=METHODS, required=True)
    arguments.add_argument("--case", required=True)
    arguments.add_argument("--step", type=float, required=True)
    arguments.add_argument("--output", required=True)
    given = arguments.parse_args()
    with open(given.case, encoding="utf-8") as file:
        case = json.load(file)
    step, method = given.step, METHODS[given.method]
    model = Model(case, step)
    begin, end = case["time"]["from"], case["time"]["to"]
    steps = math.floor((end - begin) / step * (1 + 1e-12))
    x = [state["start"] for state in case["states"]]
    with open(given.output, "w", encoding="utf-8") as file:
        names = [one["name"] for one in case["states"] + case["outputs"]]
        print("t", *names, sep=",", file=file)
        for number in range(steps + 1):
            t = begin + number * step
            print(*[repr(value) for value in [t] + x + model.output(t, x)], sep=",", file=file)
            if number < steps:
                x = method(model, t, x, step)


if __name__ == "__main__":
    main()
