#!/usr/bin/env python3
"""How fast the whole lint is, beside a yardstick that only splits the same file into words.

Builds the yardstick and the program, generates netlists, and runs both in turn on each file, so that the noise of a shared
machine hits both alike: ratios of one round are compared, never seconds of different ones. Needs the folder with the
generator and the yardstick (`../shared/perf`, or DRAINWISE_SHARED/perf); exit code 2 where it is absent.
"""
import argparse
import math
import os
import statistics
import subprocess
import sys
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
OUT = ROOT / "target" / "bench"
# name, style, devices; the sizes of the flat files are about 1, 10 and 100 MB
FILES = [
    ("flat1m", "flat", 15_000),
    ("flat10m", "flat", 140_000),
    ("flat100m", "flat", 1_350_000),
    ("hier1e6", "hier", 1_000_000),
    ("array1e3", "array", 1_000),
    ("array1e8", "array", 100_000_000),
]


def perf_folder():
    base = Path(os.environ.get("DRAINWISE_SHARED", ROOT.parent / "shared"))
    perf = base / "perf"
    if not (perf / "gen_netlist.py").is_file():
        print(f"run.py: {perf} holds no gen_netlist.py: the yardstick and the generator are not here (set DRAINWISE_SHARED)", file=sys.stderr)
        sys.exit(2)
    return perf


def build(perf):
    yard = ROOT / "target" / "yardstick"
    own = dict(os.environ, CARGO_TARGET_DIR=str(yard))
    manifest = str(perf / "bound" / "Cargo.toml")
    subprocess.run(["cargo", "build", "--release", "--quiet", "--manifest-path", manifest], env=own, cwd=ROOT, check=True)
    subprocess.run(["cargo", "build", "--release", "--quiet"], cwd=ROOT, check=True)
    return yard / "release" / "bound", ROOT / "target" / "release" / "drainwise"


def generate(perf, name, style, devices):
    path = OUT / f"{name}.cir"
    if not path.exists():
        part = path.with_suffix(".part")
        command = [sys.executable, str(perf / "gen_netlist.py"), "--plain", "--style", style, "--devices", str(devices), "-o", str(part)]
        subprocess.run(command, check=True)
        part.rename(path)
    return path


def warm(path):
    """Both shall find the file in the page cache. In small pieces: a child's peak memory counts its parent's at the start."""
    with open(path, "rb") as file:
        while file.read(1 << 20):
            pass


def measure(command, accepted, limit):
    """Wall seconds and peak resident bytes of one run."""
    began = time.perf_counter()
    process = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    while True:
        pid, status, usage = os.wait4(process.pid, os.WNOHANG)
        wall = time.perf_counter() - began
        if pid:
            break
        if wall > limit:
            process.kill()
            os.wait4(process.pid, 0)
            process.returncode = -9
            return None
        time.sleep(min(0.0002 + wall / 1000, 0.02))
    code = os.waitstatus_to_exitcode(status)
    process.returncode = code
    if code not in accepted:
        print(f"run.py: {' '.join(map(str, command))} ended with code {code}", file=sys.stderr)
        sys.exit(1)
    return wall, usage.ru_maxrss * 1024


def row(name, devices, path, bound, program, deck, options):
    yard_runs, own_runs = [], []
    for _ in range(options.pairs):
        yard_runs.append(measure([bound, "tok", path], (0,), options.limit))
        # 1: findings; 2 would be a file that was not read
        own = measure([program, "lint", path, "--deck", deck, "--format", "short"], (0, 1), options.limit)
        if own is None:
            print(f"{name:10} {path.stat().st_size / 1e6:9.3f} MB: drainwise needed more than {options.limit} s", flush=True)
            return None
        own_runs.append(own)
    yard = statistics.median(wall for wall, _ in yard_runs)
    wall = statistics.median(wall for wall, _ in own_runs)
    ratio = statistics.median(own[0] / yard[0] for own, yard in zip(own_runs, yard_runs))
    peak = max(peak for _, peak in own_runs)
    size = path.stat().st_size
    print(f"{name:10} {size / 1e6:9.3f} {yard:9.4f} {wall:9.4f} {ratio:8.2f} {peak / 1e6:9.1f} {peak / devices:11.4g}", flush=True)
    return size, wall


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--pairs", type=int, default=5, help="rounds; each runs both programs once (default 5)")
    parser.add_argument("--quick", action="store_true", help="leave out the 100 MB file")
    parser.add_argument("--limit", type=float, default=120, help="seconds after which a run is given up (default 120)")
    options = parser.parse_args()
    perf = perf_folder()
    OUT.mkdir(parents=True, exist_ok=True)
    bound, program = build(perf)
    wanted = [file for file in FILES if not (options.quick and file[0] == "flat100m")]
    print(f"{'file':10} {'MB':>9} {'tok s':>9} {'lint s':>9} {'x tok':>8} {'peak MB':>9} {'B a device':>11}", flush=True)
    seen = {}
    for name, style, devices in wanted:
        path = generate(perf, name, style, devices)
        warm(path)
        seen[name] = row(name, devices, path, bound, program, perf / "deck.yaml", options)
    for small, large in (("flat1m", "flat10m"), ("flat10m", "flat100m")):
        if seen.get(small) and seen.get(large):
            (size_a, wall_a), (size_b, wall_b) = seen[small], seen[large]
            print(f"growth exponent {small} to {large}: {math.log(wall_b / wall_a) / math.log(size_b / size_a):.3f}")
    if seen.get("array1e3") and seen.get("array1e8"):
        print(f"array1e8 / array1e3, wall: {seen['array1e8'][1] / seen['array1e3'][1]:.2f}")


main()
