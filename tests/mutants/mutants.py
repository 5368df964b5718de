#!/usr/bin/env python3
"""Puts a sample of mutants into one build, each behind a switch, and runs the tests against each.

    cargo mutants --list --json -f 'src/method/**' >mutants.json
    tests/mutants/mutants.py build mutants.json COPY --seed 1 --each method=60
    tests/mutants/mutants.py reach COPY            # which tests come to which function, and how long they take
    tests/mutants/mutants.py run COPY              # COPY/result.json; --only 3,17 for some again
    tests/mutants/mutants.py show COPY

COPY is a folder outside the repository. A mutant is a copy of the whole body of its function, taken where
STEPGAUGE_MUTANT has its number: so there is one build for all of them, and a test runs only where it comes
to the function. What does not compile is left out and the next one drawn. Bodies that return `impl Trait`
and constants cannot be switched and are not drawn.
"""

import argparse
import concurrent.futures
import json
import os
import random
import re
import subprocess
import tempfile
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]

SWITCH = """
/// Whether a mutant is switched on (tests/mutants/mutants.py).
pub(crate) fn mutant(number: usize) -> bool {
    use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering::Relaxed};
    const UNREAD: usize = usize::MAX;
    const REACH: usize = usize::MAX - 1;
    static ON: AtomicUsize = AtomicUsize::new(UNREAD);
    static SEEN: [AtomicBool; COUNT] = [const { AtomicBool::new(false) }; COUNT];
    let mut on = ON.load(Relaxed);
    if on == UNREAD {
        let text = std::env::var("STEPGAUGE_MUTANT").unwrap_or_default();
        on = if text == "reach" { REACH } else { text.parse().unwrap_or(UNREAD - 2) };
        ON.store(on, Relaxed);
    }
    if on == REACH && !SEEN[number].swap(true, Relaxed) {
        use std::io::Write;
        let path = std::env::var("STEPGAUGE_REACH").unwrap();
        let file = std::fs::OpenOptions::new().append(true).create(true).open(path);
        file.unwrap().write_all(format!("{number}\\n").as_bytes()).unwrap();
    }
    on == number
}
"""


def module(mutant):
    parts = mutant["file"].split("/")
    return Path(parts[2]).stem if parts[1] == "trajectory" else parts[1]


def offset(lines, place):
    """From line and column (of characters, from 1) to the place in the text."""
    return sum(len(line) for line in lines[: place["line"] - 1]) + place["column"] - 1


def body_start(text, at):
    """The brace that opens the body of the function at `at`: past comments, strings and brackets."""
    skip = re.compile(r'//[^\n]*|/\*.*?\*/|"(?:\\.|[^"\\])*"|.', re.S)
    depth = 0
    for token in skip.finditer(text, at):
        word = token.group()
        if word in "([":
            depth += 1
        elif word in ")]":
            depth -= 1
        elif word == "{" and depth == 0:
            return token.start()
    raise ValueError("no body")


def can_be_switched(mutant, text):
    function = mutant["function"]
    if function is None or "impl" in (function["return_type"] or ""):
        return False
    start = offset(text.splitlines(True), function["span"]["start"])
    return "const fn" not in text[start : body_start(text, start)]


def rewrite(copy, chosen):
    """Writes the sources with every chosen mutant; tells which lines are whose."""
    owners = {}
    for name in {mutant["file"] for mutant in chosen.values()}:
        text = (ROOT / name).read_text()
        lines = text.splitlines(True)
        functions = {}
        for number, mutant in chosen.items():
            if mutant["file"] == name:
                span = mutant["function"]["span"]
                place = offset(lines, span["start"]), offset(lines, span["end"])
                functions.setdefault(place, []).append(number)
        # What is within another function moves to the outer one.
        for place in sorted(functions, key=lambda place: place[0] - place[1]):
            outer = [other for other in functions if other[0] < place[0] and place[1] < other[1]]
            if outer:
                functions[outer[0]] += functions.pop(place)
        out, done = [], 0
        for (start, end), numbers in sorted(functions.items()):
            body = body_start(text, start)
            out.append((None, text[done : body] + "{\n"))
            for number in sorted(numbers):
                span = chosen[number]["span"]
                first, last = offset(lines, span["start"]), offset(lines, span["end"])
                changed = text[body:first] + chosen[number]["replacement"] + " " + text[last:end]
                out.append((number, f"if crate::mutant({number})\n{changed} else\n"))
            out.append((None, text[body:end] + "\n}"))
            done = end
        out.append((None, text[done:]))
        line = 1
        for number, piece in out:
            count = piece.count("\n")
            if number is not None:
                owners.update({(name, line + k): number for k in range(count)})
            line += count
        (copy / name).write_text("".join(piece for _, piece in out))
    library = (ROOT / "src/lib.rs").read_text().replace("#![deny(missing_docs)]", "#![allow(warnings)]")
    count = max(chosen) + 1
    (copy / "src/lib.rs").write_text(library + SWITCH.replace("COUNT", str(count)))
    return owners


def cargo(copy, *arguments):
    command = ["cargo", *arguments, "--message-format=json", "-j2"]
    run = subprocess.run(command, cwd=copy, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    return run, [json.loads(line) for line in run.stdout.splitlines() if line.startswith("{")]


def build(options):
    copy = options.copy.resolve()
    copy.mkdir(parents=True, exist_ok=True)
    files = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=True)
    subprocess.run(["rsync", "-a", "--files-from=-", f"{ROOT}/", f"{copy}/"], input=files.stdout, text=True, check=True)
    texts = {}
    waiting = {}
    for mutant in json.loads(options.mutants.read_text()):
        text = texts.setdefault(mutant["file"], (ROOT / mutant["file"]).read_text())
        if can_be_switched(mutant, text):
            waiting.setdefault(module(mutant), []).append(mutant)
    wanted = {name: int(count) for name, count in (part.split("=") for part in options.each.split(","))}
    for name, mutants in waiting.items():
        random.Random(f"{options.seed} {name}").shuffle(mutants)
    chosen, unviable, number = {}, [], 0
    while True:
        for name, count in wanted.items():
            have = sum(module(mutant) == name for mutant in chosen.values())
            for _ in range(min(count - have, len(waiting[name]))):
                chosen[number] = waiting[name].pop(0)
                number += 1
        owners = rewrite(copy, chosen)
        run, messages = cargo(copy, "check", "--lib")
        if run.returncode == 0:
            break
        bad = set()
        for message in messages:
            if message.get("message", {}).get("level") == "error":
                for span in message["message"]["spans"]:
                    bad.add(owners.get((span["file_name"], span["line_start"])))
        bad.discard(None)
        print(f"{len(bad)} do not compile", flush=True)
        if not bad:
            raise SystemExit(run.stderr + str([m["message"]["rendered"] for m in messages if m["reason"] == "compiler-message"])[:3000])
        for one in bad:
            unviable.append(chosen.pop(one)["name"])
    run, messages = cargo(copy, "test", "--no-run", "--lib", "--bins", "--test", "it")
    if run.returncode:
        raise SystemExit(run.stderr)
    programs = {
        message["target"]["name"]: message["executable"]
        for message in messages
        if message.get("profile", {}).get("test") and message["executable"] and message["target"]["kind"] != ["bin"]
    }
    (copy / "chosen.json").write_text(json.dumps({"programs": programs, "chosen": chosen, "unviable": unviable}))
    print(len(chosen), "mutants,", len(unviable), "did not compile", programs)


def load(copy):
    data = json.loads((copy / "chosen.json").read_text())
    return data["programs"], {int(number): mutant for number, mutant in data["chosen"].items()}


def run_tests(copy, program, tests, seconds, **environment):
    """`passed`, `timeout`, or the name of the first test that fails."""
    command = [program, "--exact", "--test-threads", "1", *tests]
    environment = dict(os.environ, RAYON_NUM_THREADS="1", **environment)
    failing = re.compile(r"^test (\S+)(?: - should panic)? \.\.\. FAILED", re.M)
    with tempfile.NamedTemporaryFile("w+") as out:
        run = subprocess.Popen(
            command, cwd=copy, stdin=subprocess.DEVNULL, stdout=out, stderr=subprocess.DEVNULL, env=environment, start_new_session=True
        )
        end, state = time.monotonic() + seconds, None
        while state is None:
            ended = run.poll()
            failed = failing.search(Path(out.name).read_text(errors="replace"))
            if failed:
                state = failed.group(1)
            elif ended is not None:
                state = "passed" if ended == 0 else f"died {ended}"
            elif time.monotonic() > end:
                state = "timeout"
            else:
                time.sleep(0.02)
    try:
        os.killpg(run.pid, 9)
    except ProcessLookupError:
        pass
    run.wait()
    return state


def reach(options):
    copy = options.copy.resolve()
    programs, _ = load(copy)
    skip = re.compile(options.skip)
    tests = []
    for program in programs.values():
        listed = subprocess.run([program, "--list"], cwd=copy, capture_output=True, text=True)
        tests += [(program, line[:-6]) for line in listed.stdout.splitlines() if line.endswith(": test") and not skip.search(line)]

    def one(test):
        with tempfile.TemporaryDirectory() as folder:
            trace = Path(folder, "reach")
            start = time.monotonic()
            state = run_tests(copy, *[test[0], [test[1]], 120], STEPGAUGE_MUTANT="reach", STEPGAUGE_REACH=str(trace))
            took = time.monotonic() - start
            reached = sorted({int(line) for line in trace.read_text().split()}) if trace.exists() else []
        if state != "passed":
            print(test[1], state, flush=True)
        return {"program": test[0], "test": test[1], "state": state, "seconds": took, "reached": reached}

    with concurrent.futures.ThreadPoolExecutor(options.workers) as pool:
        found = list(pool.map(one, tests))
    (copy / "reach.json").write_text(json.dumps(found))
    print(len(found), "tests,", sum(one["seconds"] for one in found), "s")


def run(options):
    copy = options.copy.resolve()
    _, chosen = load(copy)
    tests = [one for one in json.loads((copy / "reach.json").read_text()) if one["state"] == "passed"]
    tests = [one for one in tests if re.search(options.tests, one["test"])]
    place = copy / "result.json"
    result = json.loads(place.read_text()) if place.exists() else {}
    only = {int(number) for number in options.only.split(",")} if options.only else set(chosen) - {int(n) for n in result}

    def one(number):
        reaching = sorted((test for test in tests if number in test["reached"]), key=lambda test: test["seconds"])
        spent, state = 0.0, "survived" if reaching else "not reached"
        while reaching and spent < options.most_seconds:
            # Some seconds of one program at a time, the quickest first.
            batch, program, sum_of = [], reaching[0]["program"], 0.0
            for test in list(reaching):
                if test["program"] == program and (not batch or sum_of + test["seconds"] < 4):
                    batch.append(test["test"])
                    sum_of += test["seconds"]
                    reaching.remove(test)
            state = run_tests(copy, program, batch, 20 + 8 * sum_of, STEPGAUGE_MUTANT=str(number))
            spent += sum_of
            if state != "passed":
                break
        if state == "passed":
            state = "survived"
        return number, state, len(reaching)

    with concurrent.futures.ThreadPoolExecutor(options.workers) as pool:
        for future in concurrent.futures.as_completed([pool.submit(one, number) for number in sorted(only)]):
            number, state, left = future.result()
            result[str(number)] = {"state": state, "left": left}
            place.write_text(json.dumps(result))
            if state in ("survived", "not reached"):
                print(number, state, chosen[number]["name"], f"({left} tests left)", flush=True)


def show(options):
    _, chosen = load(options.copy)
    result = json.loads((options.copy / "result.json").read_text())
    counts = {}
    for number, mutant in chosen.items():
        if str(number) in result:
            caught = result[str(number)]["state"] not in ("survived", "not reached")
            counts.setdefault(module(mutant), []).append(caught)
            if not caught:
                print(number, mutant["name"], result[str(number)])
    for name, caught in sorted(counts.items()):
        print(f"{name}: {sum(caught)} of {len(caught)} caught")


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    commands = parser.add_subparsers(required=True)
    for function in (build, reach, run, show):
        command = commands.add_parser(function.__name__)
        command.set_defaults(function=function)
        if function is build:
            command.add_argument("mutants", type=Path)
            command.add_argument("--seed", default="1")
            command.add_argument("--each", required=True)
        command.add_argument("copy", type=Path)
        command.add_argument("--workers", type=int, default=2)
        if function is reach:
            command.add_argument("--skip", default="^(tidy|killed|machine|drive|readme|comfort|hostile|hostile_bytes|merge)::")
        if function is run:
            command.add_argument("--only", default="")
            command.add_argument("--most-seconds", type=float, default=60)
            command.add_argument("--tests", default="", help="only tests with such a name")
    options = parser.parse_args()
    options.function(options)


if __name__ == "__main__":
    main()
