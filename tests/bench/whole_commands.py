"""What whole commands cost as files grow in length, number, width and kind, beside polars in the same minute.

usage: whole_commands.py STEPGAUGE [options]       (--help lists them; the default takes about an hour and 2 GB of disk)

  rows     even stamps, 4 states: time for each row beside that of the longest file, and for each further row
  threads  one and two threads on the longest of these files
  states   1, 4, 16 and 64 states in files of about one size
  stamps   even and scattered stamps, 17 and 6 digits; exact to the last of 17 digits
  twins    the same numbers as text, gzip and NumPy file
  files    1 to 10,000 runs of 200 rows, in submissions of four

Needs numpy and polars. Wall and processor time are those of whole commands, medians over the rounds; `of polars`
is the processor time over that of polars loading the same text, median of the paired runs. Machines are noisy, so
look at the ratios.
"""
import argparse, glob, gzip, multiprocessing, os, shutil, sys, tempfile

from side_by_side import median, run

SECTIONS = ["rows", "threads", "states", "stamps", "twins", "files"]


def apart(work, *arguments):
    """Does it in a process of its own: a command counts the memory of whoever started it as its own."""
    process = multiprocessing.get_context("spawn").Process(target=work, args=arguments)
    process.start()
    process.join()
    if process.exitcode:
        sys.exit("the files cannot be made")


def make_cases(folder, lengths):
    import chains
    for length in lengths:
        with open(f"{folder}/chain-{length}.toml", "w") as file:
            file.write(chains.case(length))


def make_file(path, steps, shape):
    import chains
    chains.write(path, steps, **shape)


def make_submissions(folder, runs, kind):
    import chains
    chains.submissions(folder, runs, kind)


def make_twins(text, packed, table):
    import numpy as np
    import polars as pl
    with open(text, "rb") as source, gzip.open(packed, "wb", compresslevel=6) as target:
        shutil.copyfileobj(source, target)
    frame = pl.read_csv(text)
    whole = np.empty(len(frame), dtype=[(name, "f8") for name in frame.columns])
    for name in frame.columns:
        whole[name] = frame[name].to_numpy()
    np.save(table, whole)


def load(path):
    """The other side: every text file, loaded into an array."""
    import polars as pl
    for file in [path] if os.path.isfile(path) else sorted(glob.glob(f"{path}/*/*.csv")):
        pl.read_csv(file).to_numpy()


class Bench:
    def __init__(self, options, folder):
        self.options, self.folder, self.cases = options, folder, f"{folder}/cases"
        os.makedirs(self.cases)
        apart(make_cases, self.cases, sorted({1, 4, *options.states}))

    def path(self, name):
        return f"{self.folder}/{name}"

    def audit(self, path, length=None, threads=None):
        command = [self.options.program, "audit", path, "--cases", self.cases, "--quiet"]
        command += ["--case", f"bench/chain-{length}"] if length else []
        return command + (["--threads", str(threads)] if threads else [])

    def times(self, *commands):
        """For each command its runs; they take turns."""
        rounds = [[run(command) for command in commands] for _ in range(self.options.rounds)]
        return list(zip(*rounds))

    def beside_polars(self, name, command, text, size):
        """Prints one line; gives the median wall and processor time."""
        own, polars = self.times(command, [sys.executable, __file__, "--load", text])
        wall, cpu, memory = (median([one[k] for one in own]) for k in range(3))
        of_polars = median([a[1] / b[1] for a, b in zip(own, polars)])
        line = f"  {name:32} {size / 1e6:8.1f} MB {wall:8.3f} s wall {cpu:8.3f} s processor {memory:6.0f} MiB"
        print(f"{line} {size / 1e6 / wall:7.1f} MB/s {of_polars:6.2f} of polars", flush=True)
        return wall, cpu

    def one_file(self, name, steps, **shape):
        path = self.path("run.csv")
        apart(make_file, path, steps, shape)
        length = shape.get("length", 4)
        found = self.beside_polars(name, self.audit(path, length), path, os.path.getsize(path))
        os.remove(path)
        return found

    def rows(self):
        print("rows: 4 states, 17 digits, even stamps")
        costs = []
        for steps in sorted(self.options.rows):
            wall, cpu = self.one_file(f"{steps} rows", steps)
            costs.append((steps, wall, cpu))
        last_wall, last_cpu = (costs[-1][k] / costs[-1][0] for k in [1, 2])
        for number, (steps, wall, cpu) in enumerate(costs):
            line = f"  {steps:10} rows: {1e6 * cpu / steps:8.3f} us for each row, "
            line += f"{wall / steps / last_wall:6.2f} (wall) {cpu / steps / last_cpu:6.2f} (processor) of the longest"
            if number:
                fewer, _, less = costs[number - 1]
                line += f"; {1e6 * (cpu - less) / (steps - fewer):8.3f} us for each further row"
            print(line, flush=True)

    def threads(self):
        steps, path = max(self.options.rows), self.path("run.csv")
        apart(make_file, path, steps, {})
        print(f"threads: {steps} rows, {os.path.getsize(path) / 1e6:.0f} MB")
        one, two = self.times(*[self.audit(path, 4, threads) for threads in [1, 2]])
        os.remove(path)
        for name, runs in [("1 thread", one), ("2 threads", two)]:
            wall, cpu, _ = (median([each[k] for each in runs]) for k in range(3))
            print(f"  {name:32} {wall:8.3f} s wall {cpu:8.3f} s processor")
        print(f"  wall of one over that of two: {median([a[0] / b[0] for a, b in zip(one, two)]):.2f}", flush=True)

    def states(self):
        print("states: 17 digits, even stamps")
        for length in self.options.states:
            steps = 5 * self.options.middle // (length + 1)
            self.one_file(f"{length} states, {steps} rows", steps, length=length)

    def stamps(self):
        steps = self.options.middle
        print(f"stamps: {steps} rows, 4 states")
        for digits in [17, 6]:
            even = self.one_file(f"even, {digits} digits", steps, digits=digits)
            scattered = self.one_file(f"scattered, {digits} digits", steps, digits=digits, scattered=True)
            print(f"  scattered over even, processor: {scattered[1] / even[1]:.2f}", flush=True)
        for word, scattered in [("even", False), ("scattered", True)]:
            self.one_file(f"{word}, 17 digits, exact", steps, scattered=scattered, error=0.0)

    def twins(self):
        steps, text = self.options.middle, self.path("run.csv")
        packed, table = self.path("run.csv.gz"), self.path("run.npy")
        print(f"twins: {steps} rows, 4 states, 17 digits, even stamps; MB of each file as it lies there")
        apart(make_file, text, steps, {})
        apart(make_twins, text, packed, table)
        for name, path in [("text", text), ("gzip", packed), ("NumPy", table)]:
            self.beside_polars(name, self.audit(path, 4), text, os.path.getsize(path))
        for path in [text, packed, table]:
            os.remove(path)

    def files(self):
        for kind in ["shared", "own", "varied"]:
            print(f"files: runs of 200 rows, {kind} steps")
            for runs in self.options.files:
                folder = self.path(f"runs-{kind}")
                apart(make_submissions, folder, runs, kind)
                size = sum(os.path.getsize(path) for path in glob.glob(f"{folder}/*/*.csv"))
                wall, cpu = self.beside_polars(f"{runs} runs", self.audit(folder), folder, size)
                print(f"    {1e3 * wall / runs:8.2f} ms wall, {1e3 * cpu / runs:8.2f} ms processor for each run", flush=True)
                shutil.rmtree(folder)


def numbers(text):
    return [int(float(part)) for part in text.split(",")]


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("program", type=os.path.abspath, help="the stepgauge to be timed")
    parser.add_argument("--only", type=lambda text: text.split(","), default=SECTIONS, help="sections, as in rows,files")
    parser.add_argument("--rows", type=numbers, default=numbers("1e4,1e5,1e6,1e7"), help="as in 1e4,1e5")
    parser.add_argument("--files", type=numbers, default=numbers("1,10,100,1000,10000"), help="as in 1,100")
    parser.add_argument("--states", type=numbers, default=numbers("1,4,16,64"), help="as in 4,64")
    parser.add_argument("--middle", type=lambda text: int(float(text)), default=1_000_000,
                        help="rows of a file with 4 states that is neither short nor long")
    parser.add_argument("--rounds", type=int, default=3)
    options = parser.parse_args()
    unknown = set(options.only) - set(SECTIONS)
    if unknown:
        parser.error(f"no such section: {', '.join(sorted(unknown))}")
    with tempfile.TemporaryDirectory() as folder:
        bench = Bench(options, folder)
        for section in options.only:
            getattr(bench, section)()


if __name__ == "__main__":
    if sys.argv[1:2] == ["--load"]:
        load(sys.argv[2])
    else:
        main()
