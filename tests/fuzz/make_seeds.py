"""Makes tests/fuzz/seeds out of cases, submissions and files that are here; run it again at will."""

import gzip
import io
import struct
import zipfile
from pathlib import Path

HERE = Path(__file__).resolve().parent
ROOT = HERE.parents[1]
MOST_BYTES = 7000
FORMATS = ROOT / "tests/outside/formats"
BETWEEN = b"\n=====\n"


def lay(target, name, data):
    if len(data) <= MOST_BYTES:
        folder = HERE / "seeds" / target
        folder.mkdir(parents=True, exist_ok=True)
        (folder / name).write_bytes(data)


def head(path, lines=12):
    return b"".join(path.read_bytes().splitlines(keepends=True)[:lines])


def array(values):
    shape = b"{'descr': '<f8', 'fortran_order': False, 'shape': (%d,), }" % len(values)
    shape += b" " * (117 - len(shape)) + b"\n"
    return b"\x93NUMPY\x01\x00" + struct.pack("<H", len(shape)) + shape + struct.pack(f"<{len(values)}d", *values)


def archive(packing):
    """The date is fixed, so that the bytes are the same each time."""
    data = io.BytesIO()
    with zipfile.ZipFile(data, "w", packing) as file:
        for name in ["t", "x"]:
            member = zipfile.ZipInfo(name + ".npy", (2000, 1, 1, 0, 0, 0))
            member.compress_type = packing
            file.writestr(member, array([0.5 * k for k in range(6)]))
    return data.getvalue()


def main():
    cases = ["electrical/rc-pulse", "membrane/leaky-pulse-train", "membrane/leaky-sine",
             "control/lag-held-samples", "control/lag-linear-samples", "stress/jordan-4",
             "stress/exponential-input", "stress/stiff-1e12", "process/tank-leak-ramp"]
    for case in cases:
        lay("case", case.replace("/", "-"), (ROOT / f"reference-cases/{case}.toml").read_bytes())
    formulas = ["-2*x + u", "exp(-t/1.5)*(x+y)^2", "sqrt(abs(sin(2*pi*t)))", "((((x))))", "1e-3*(x - y)/2.5",
                "min(x, y)", "2^-3^2", "ln(t)*cosh(1)"]
    for number, formula in enumerate(formulas):
        lay("formula", str(number), formula.encode())
    for path in sorted(ROOT.glob("demo-runs/**/submission.toml")):
        lay("submission", "-".join(path.parts[-3:-1]), path.read_bytes())
    lay("submission", "every-key", EVERY_KEY)
    lay("rules", "every-key", RULES)
    lay("plan", "demo", (ROOT / "demo-runs/simulator/plan.toml").read_bytes())
    lay("plan", "stated", PLAN)
    texts = [p for p in sorted(ROOT.glob("demo-runs/**/*")) if p.suffix in {".csv", ".txt", ".out", ".dat"}]
    for path in texts:
        lay("text", "-".join(path.parts[-3:]), b"\0\0\xff" + head(path))
    lay("text", "long", b"\x80\x00\xfftime,name,value\n0,x,1\n0,y,2\n1,x,3\n1,y,4\n2,x,5\n2,y,6\n")
    lay("text", "long-scattered", b"\x80\x90\x07t;name;value\n0;x;1\n1;x;2\n2;x;3\n0;y;4\n1;y;5\n2;y;6\n")
    lay("text", "decimal-comma", b"\x04\x00\x0f# made by hand\nt;x\n0;1,5\n0,5;1,25\n1;1,125\n")
    lay("digits", "some", bytes([0, 20, 1, 16, 5, 24, 1, 20, 2, 16, 25, 24, 2, 20, 3, 16, 125, 24] * 6))
    for path in sorted(FORMATS.iterdir()):
        target = {".npy": "npy", ".npz": "npz", ".mat": "mat", ".gz": "gzip", ".zst": "zstd"}.get(path.suffix)
        if target:
            lay(target, path.name, path.read_bytes())
    for packing, name in [(zipfile.ZIP_STORED, "stored"), (zipfile.ZIP_DEFLATED, "deflated")]:
        lay("npz", name, archive(packing))
    lay("gzip", "small", gzip.compress(b"t,x\n0,1\n1,2\n", mtime=0) * 2)
    exact = [(0.25 * k, 5.0 * (1.0 - 2.718281828459045 ** (-0.25 * k / 1.02))) for k in range(41)]
    rows = b"t,v\n" + b"".join(b"%.2f,%.10f\n" % row for row in exact)
    for method in ["Heun", "classical RK4", "BDF2"]:
        toml = b'case = "electrical/rc-constant"\n[claims]\nmethod = "%s"\n[[runs]]\nfile = "a"\nstep = 0.25\n' % method.encode()
        lay("whole", method.replace(" ", "-"), toml + BETWEEN + rows)
    ladder = b'case = "electrical/rc-constant"\n[claims]\norder = 2\n[columns]\ntime = "t"\n[[runs]]\nfile = "a"\nstep = 0.25\n' \
        b'[[runs]]\nfile = "b"\nstep = 0.5\n'
    half = b"\n".join(rows.splitlines()[:1] + rows.splitlines()[1::2]) + b"\n"
    lay("whole", "ladder", ladder + BETWEEN + rows + BETWEEN + half)
    lay("whole", "alone", ladder.replace(b'case = "electrical/rc-constant"\n', b"") + BETWEEN + rows + BETWEEN + half)
    for name in ["euler.csv.gz", "one.csv.zst", "version2.npy", "vectors.npz", "plain.mat"]:
        path = FORMATS / name
        if path.exists():
            toml = b'case = "electrical/rc-constant"\n[columns]\ntime = 1\nv = 2\n[[runs]]\nfile = "a"\n'
            lay("whole", name, toml + BETWEEN + path.read_bytes())


EVERY_KEY = b"""case = "electrical/rc-constant"
producer = "alder"
expect = "pass"
[parameters]
R = 1e3
[claims]
method = "Heun"
order = 2
[limits]
absolute = 1e-3
relative = 1e-3
relative_to = "peak"
order_slack = 0.2
v = { absolute = 1e-4 }
[columns]
time = { column = "t", unit = "ms" }
v = 2
[layout]
separator = "comma"
decimal = "."
comment = "#"
skip_lines = 1
digits = 6
[[runs]]
file = "run.csv"
step = 0.1
role = "result"
cost = 3
[[runs]]
file = "run.csv"
tolerance = 1e-6
role = "rung"
"""

RULES = b"""own_parameters = "refuse"
own_cases = "allow"
controls = "refuse"
[limits]
absolute = 1e-3
relative = 0.01
order_slack = 0.2
[case_limits."thermal/cold-room-defrost"]
absolute = 1e-4
air = { relative = 1e-3 }
[[require]]
case = "thermal/cold-room-defrost"
runs = 3
rows = 10
methods = ["RK4", "Heun"]
method_shown = true
"""

PLAN = b"""producer = "x"
command = ["{plan}/x", "--case={case}", "{step}", "{output}"]
cases = ["electrical/rc-*", "thermal/cooling-body"]
steps = [0.1, 0.05]
jobs = 2
time_limit = 10
[claims]
order = 4
[columns]
time = "t"
[limits]
absolute = 1e-3
[layout]
digits = 9
"""

if __name__ == "__main__":
    main()
