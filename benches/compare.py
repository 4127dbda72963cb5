#!/usr/bin/env python3
"""Sweeps the same tilts with twincone and with NumPy and says how many times faster one is.

    cargo build --release --locked
    python3 benches/compare.py                       # a million tilts here, 20000 of them with NumPy
    python3 benches/compare.py --points 20000 --numpy-points 5000 --runs 1

twincone is timed as a whole process from start to exit; NumPy from its first tilt to its last byte, without the start
of the interpreter and the imports. Both write their tables. They take turns, three times each, and the best time of
each counts. For `both`, the times of the two reports are added. Before any number is printed the tables are compared, a
few thousand rows spread over the whole sweep.
"""

import argparse
import csv
import json
import os
import platform
import subprocess
import sys
import tempfile
import time
from pathlib import Path

HERE = Path(__file__).resolve().parent
PROGRAM = HERE.parent / "target" / "release" / ("twincone.exe" if os.name == "nt" else "twincone")
JOB = HERE / "million_tilts.toml"
NUMPY = HERE / "rings_numpy.py"
REPORTS = ["rings", "crossings"]
COMPARED = 2000


def run(command):
    """Runs to the end; what it said goes with it where it fails."""
    done = subprocess.run([str(word) for word in command], capture_output=True, text=True)
    if done.returncode != 0:
        raise SystemExit(f"{' '.join(map(str, command))}\nexit status {done.returncode}\n{done.stdout}{done.stderr}")
    return done.stdout


def program(options, report, out):
    """Seconds from start to exit."""
    axis = f"crystal.tilt=-1deg..4deg/{options.points}"
    command = [options.program, "run", JOB, "--report", report, "--axis", axis, "-o", out]
    start = time.perf_counter()
    run([*command, "--threads", options.threads, "--quiet"])
    return time.perf_counter() - start


def numpy(points, report, out):
    """Seconds as the script measures them."""
    answer = run([sys.executable, NUMPY, "--points", points, "--report", report, "--out", out])
    return json.loads(answer)["seconds"]


def agree(table, points, folder):
    """Compares rows spread over a table of the program with NumPy's; how far they are apart at most, deg."""
    every = max(1, points // COMPARED)
    thinned = folder / "thinned.csv"
    last = -1
    with open(table, newline="", encoding="utf-8") as rows, open(thinned, "w", newline="", encoding="utf-8") as few:
        reader, writer = csv.reader(rows), csv.writer(few, lineterminator="\n")
        writer.writerow(next(reader))
        for row in reader:
            last = int(row[0])
            if last % every == 0:
                writer.writerow(row)
    if last != points - 1:
        raise SystemExit(f"{table}: ends at point {last}, {points - 1} expected")
    return json.loads(run([sys.executable, NUMPY, "--check", thinned]))["largest_difference"]["deg"]


def main():
    parser = argparse.ArgumentParser(description="Speed of twincone and of NumPy on the same sweep.")
    parser.add_argument("--points", type=int, default=1_000_000, help="tilts for twincone")
    parser.add_argument("--numpy-points", type=int, default=20_000, help="tilts for NumPy, over the same range")
    parser.add_argument("--threads", type=int, default=2)
    parser.add_argument("--runs", type=int, default=3, help="of each, of which the best counts")
    parser.add_argument("--program", type=Path, default=PROGRAM)
    parser.add_argument("--json", action="store_true", help="for scripts")
    options = parser.parse_args()
    options.program = options.program.resolve()
    if not options.program.exists():
        raise SystemExit(f"{options.program}: not there; `cargo build --release` makes it")

    seconds, difference = {}, {}
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        for report in REPORTS:
            ours, theirs = folder / f"{report}.csv", folder / f"{report}-numpy.csv"
            here, there = [], []
            for _ in range(options.runs):
                ours.unlink(missing_ok=True)
                here.append(program(options, report, ours))
                there.append(numpy(options.numpy_points, report, theirs))
            difference[report] = agree(ours, options.points, folder)
            seconds[report] = (min(here) / options.points, min(there) / options.numpy_points)
            ours.unlink()
    seconds["both"] = tuple(sum(seconds[report][i] for report in REPORTS) for i in (0, 1))

    rates = {
        report: {"twincone_per_s": 1 / here, "numpy_per_s": 1 / there, "ratio": there / here}
        for report, (here, there) in seconds.items()
    }
    if options.json:
        points = {"points": options.points, "numpy_points": options.numpy_points}
        workers = {"threads": options.threads, "numpy_processes": 1, "runs": options.runs}
        print(json.dumps({**points, **workers, "largest_difference_deg": difference, **rates}))
        return
    print(f"{options.points} tilts on {options.threads} threads; NumPy: {options.numpy_points} in one process")
    print(f"best of {options.runs} runs of each, which took turns")
    print(f"{platform.processor() or platform.machine()}, {os.cpu_count()} cores, Python {platform.python_version()}")
    apart = ", ".join(f"{report} {degrees:.1e} deg" for report, degrees in difference.items())
    print(f"largest difference between the two: {apart}")
    print(f"{'report':<10} {'twincone/s':>12} {'NumPy/s':>12} {'ratio':>8}")
    for report, rate in rates.items():
        print(f"{report:<10} {rate['twincone_per_s']:>12.0f} {rate['numpy_per_s']:>12.0f} {rate['ratio']:>8.1f}")


if __name__ == "__main__":
    main()
