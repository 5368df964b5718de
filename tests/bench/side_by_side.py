"""Whole audits beside data-frame scripts in the same minutes: medians of paired runs.

usage: side_by_side.py STEPGAUGE [ROWS] [ROUNDS]      (10,700,000 rows are 1 GB; 5 rounds)

Needs numpy, scipy, polars and pandas. Files are made in a temporary folder and removed. Wall and processor
time are those of whole commands, as the shell sees them; machines are noisy, so look at the ratios.
"""
import os, resource, subprocess, sys, tempfile, time

HERE = os.path.dirname(os.path.abspath(__file__))


def run(command):
    """Wall time, processor time and largest memory in MiB of one command."""
    begin, before = time.time(), resource.getrusage(resource.RUSAGE_CHILDREN)
    process = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    _, _, used = os.wait4(process.pid, 0)
    return time.time() - begin, used.ru_utime + used.ru_stime, used.ru_maxrss / 1024


def median(values):
    return sorted(values)[len(values) // 2]


def main():
    program = os.path.abspath(sys.argv[1])
    rows = sys.argv[2] if len(sys.argv) > 2 else "10700000"
    rounds = int(sys.argv[3]) if len(sys.argv) > 3 else 5
    with tempfile.TemporaryDirectory() as folder:
        os.makedirs(f"{folder}/cases/bench")
        subprocess.run(["cp", f"{HERE}/chain.toml", f"{folder}/cases/bench/"], check=True)
        for digits in ["17", "6"]:
            path = f"{folder}/{digits}.csv"
            make = [sys.executable, f"{HERE}/make_big.py", rows, digits, path]
            subprocess.run(make, check=True, stdout=subprocess.DEVNULL)
            peer = [sys.executable, f"{HERE}/peer.py"]
            audit = [program, "audit", path, "--case", "bench/chain", "--cases", f"{folder}/cases", "--quiet"]
            commands = {
                "stepgauge": audit,
                "stepgauge, 1 thread": audit + ["--threads", "1"],
                "polars, load": peer + ["polars", path, "load"],
                "polars, whole": peer + ["polars", path],
                "pandas, whole": peer + ["pandas", path],
            }
            times = {name: [] for name in commands}
            for _ in range(rounds):
                for name, command in commands.items():
                    times[name].append(run(command))
            size = os.path.getsize(path) / 1e6
            print(f"{digits} digits, {rows} rows, {size:.0f} MB, {rounds} rounds")
            for name, runs in times.items():
                wall, cpu, memory = (median([one[k] for one in runs]) for k in range(3))
                print(f"  {name:20} {wall:7.2f} s wall {cpu:7.2f} s processor {memory:6.0f} MiB {size / wall:6.0f} MB/s")

            def ratio(k, own, other):
                return median([a[k] / b[k] for a, b in zip(times[own], times[other])])

            faster = min(ratio(0, "stepgauge", other) ** -1 for other in ["polars, whole", "pandas, whole"])
            print(f"  wall, of the faster whole script   {1 / faster:.2f}")
            print(f"  processor, of polars loading       {ratio(1, 'stepgauge', 'polars, load'):.2f}")
            print(f"  one thread's wall, of two          {ratio(0, 'stepgauge, 1 thread', 'stepgauge'):.2f}", flush=True)


if __name__ == "__main__":
    main()
