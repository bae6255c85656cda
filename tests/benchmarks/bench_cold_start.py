"""How long does a user wait: import, help, check, the first run ever and the second, each in a process of its own?

    python tests/benchmarks/bench_cold_start.py             # about two minutes
    python tests/benchmarks/bench_cold_start.py --kernels   # and where the compiling goes, function by function

The first run ever gets an empty folder for compiled kernels. Its row is the least of ``--repeats`` runs, each with
a new folder; the second run uses the folder that the last of them filled. The answers of first and second run are
compared. CPU seconds (of the process and its children) stand beside elapsed ones: on a busy machine they tell more.
"""

import argparse
import contextlib
import hashlib
import json
import os
import resource
import subprocess
import sys
import tempfile
import threading
import time
from pathlib import Path

from rows import conditions, row

ROOT = Path(__file__).resolve().parent.parent.parent
EXAMPLE = ROOT / "scenarios" / "examples" / "brindle_mere" / "scenario.yaml"
CLI = [sys.executable, "-c", "from wellshed.scenarios.cli import main; main()"]


def timed(command, cache):
    """Elapsed and CPU seconds of a command with its kernels in the folder ``cache``."""
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    start = time.perf_counter()
    done = subprocess.run(command, env={**os.environ, "NUMBA_CACHE_DIR": str(cache)}, capture_output=True, text=True)
    elapsed = time.perf_counter() - start
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    if done.returncode not in (0, 1):  # 1: a check of the answers did not pass; the run itself is whole
        sys.exit(f"{' '.join(command)} ended with {done.returncode}:\n{done.stdout}{done.stderr}")
    cpu = after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime
    return elapsed, cpu


def several(name, make, repeats, limit=None):
    """Row of the least of several runs; ``make`` gives the command and the cache folder of each."""
    runs = [timed(*make()) for _ in range(repeats)]
    elapsed = [e for e, _ in runs]
    row(
        "cold_start",
        row=name,
        seconds=round(min(elapsed), 3),
        cpu_seconds=round(min(c for _, c in runs), 3),
        spread=round(max(elapsed) / min(elapsed), 2),
        repeats=repeats,
        limit=limit,
    )
    return min(elapsed)


def difference(first, second):
    """Largest relative difference of the numbers of two answers; inf where anything else differs."""
    if isinstance(first, float | int) and isinstance(second, float | int):
        return abs(first - second) / max(abs(first), abs(second), 1.0)
    if isinstance(first, dict) and isinstance(second, dict) and first.keys() == second.keys():
        return max((difference(first[k], second[k]) for k in first), default=0.0)
    if isinstance(first, list) and isinstance(second, list) and len(first) == len(second):
        return max((difference(a, b) for a, b in zip(first, second, strict=True)), default=0.0)
    return 0.0 if first == second else float("inf")


def answers(folder):
    """The answers of a run, for comparison."""
    return json.loads((folder / "answers.json").read_text(encoding="utf-8"))


def sources():
    """Digest of all that can hold a kernel: an edit while this runs makes every later run compile anew."""
    files = sorted(f for room in ("elements", "solver", "tracing") for f in (ROOT / room).glob("*.py"))
    return hashlib.sha256(b"".join(f.read_bytes() for f in files)).hexdigest()


def record_kernels():
    """Run the example in this process and print the compile time of each jitted function, without its callees'."""
    from numba.core import event

    class Recorder(event.Listener):
        def __init__(self):
            self.stacks, self.own, self.total = {}, {}, 0.0  # a stack for each thread: compiling may happen in any

        def on_start(self, e):
            self.stacks.setdefault(threading.get_ident(), []).append([time.perf_counter(), 0.0, name_of(e)])

        def on_end(self, e):
            stack = self.stacks[threading.get_ident()]
            began, inner, name = stack.pop()
            spent = time.perf_counter() - began
            count, own = self.own.get(name, (0, 0.0))
            self.own[name] = count + 1, own + spent - inner
            if stack:
                stack[-1][1] += spent
            else:
                self.total += spent

    def name_of(e):
        function = e.data["dispatcher"].py_func
        return f"{function.__module__.removeprefix('wellshed.')}.{function.__qualname__}"

    recorder = Recorder()
    event.register("numba:compile", recorder)
    sys.argv = ["wellshed", "run", str(EXAMPLE), "--out", tempfile.mkdtemp()]
    from wellshed.scenarios.cli import main

    with contextlib.redirect_stdout(sys.stderr), contextlib.suppress(SystemExit):
        main()
    for name, (count, own) in sorted(recorder.own.items(), key=lambda item: -item[1][1]):
        row(
            "cold_start",
            row="compile",
            function=name,
            specialisations=count,
            seconds=round(own, 2),
            share=round(own / recorder.total, 3),
        )
    row("cold_start", row="compile, all", seconds=round(recorder.total, 2), functions=len(recorder.own))


def main():
    """Print the rows."""
    parser = argparse.ArgumentParser(description="cold start of the command line")
    parser.add_argument("--kernels", action="store_true", help="list compile time by function too")
    parser.add_argument("--only-kernels", action="store_true", help=argparse.SUPPRESS)
    parser.add_argument("--repeats", type=int, default=2, help="first runs to time")
    options = parser.parse_args()
    if options.only_kernels:
        record_kernels()
        return
    with tempfile.TemporaryDirectory() as scratch:
        folder = Path(scratch)
        counter = iter(range(1000))

        def new_cache():
            cache = folder / f"cache{next(counter)}"
            cache.mkdir()
            return cache

        conditions("cold_start", example=EXAMPLE.parent.name)
        empty = new_cache()
        python = [sys.executable, "-c"]
        several("python itself", lambda: ([*python, "pass"], empty), 5)
        several("import wellshed", lambda: ([*python, "import wellshed"], empty), 5)
        several("--help", lambda: ([*CLI, "--help"], empty), 5, limit=1.0)
        several("check", lambda: ([*CLI, "check", str(EXAMPLE)], empty), 5, limit=1.0)
        caches, before = [], sources()

        def first():
            caches.append(new_cache())
            return [*CLI, "run", str(EXAMPLE), "--out", str(folder / "first")], caches[-1]

        cold = several("first run ever", first, options.repeats, limit=45.0)
        warm = several(
            "second run",
            lambda: ([*CLI, "run", str(EXAMPLE), "--out", str(folder / "second")], caches[-1]),
            3,
            limit=5.0,
        )
        apart = difference(answers(folder / "first"), answers(folder / "second"))
        row("cold_start", row="ratio", first_to_second=round(cold / warm, 2), answers_differ_by=apart)
        size = sum(f.stat().st_size for f in caches[-1].rglob("*") if f.is_file())
        row("cold_start", row="compiled kernels", bytes=size)
        if sources() != before:
            sys.exit("the sources were edited meanwhile: these rows mean nothing, run it again")
        if apart > 1e-9:
            sys.exit(f"the answers of the first and the second run differ by {apart:.1e}")
        if options.kernels:
            environment = {**os.environ, "NUMBA_CACHE_DIR": str(new_cache())}
            subprocess.run([sys.executable, __file__, "--only-kernels"], env=environment, check=True)


if __name__ == "__main__":
    main()
