"""Designs that must be reached: 7 x 7 spots, continuous and by levels, free and under a rule.

Run as `python experiments/ladder/run.py [--seeds N] [--quick]`; prints row, must, got and pass, and
exits 1 on a shortfall. Seconds are from process start to saved record. Every figure is recomputed
from the saved mask by plain NumPy in float64, the rule by SciPy and klayout.
"""

import argparse
import json
import subprocess
import sys
import tempfile
import time
import tomllib
from pathlib import Path
from typing import NamedTuple

from referee import klayout_breaches, light, read, scipy_breaches

ROOT = Path(__file__).parent.parent.parent
JOB = ROOT / "configs" / "needle_mill.toml"
DOE = [sys.executable, "-m", "doe"]
CELL = 64
PITCH = 1.03e-3 / CELL
LINE = "{:<34} {:>4}  {:>7} {:>7}  {:>8} {:>8}  {:>4} {:>6}  {:>8}  {}"


class Row(NamedTuple):
    """One design: levels, rule in pixels, most uniformity error, least efficiency, seconds."""

    levels: int
    size: int
    error: float
    efficiency: float
    seconds: float


ROWS = [
    Row(0, 1, 0.001, 0.943, 60),
    Row(16, 1, 0.005, 0.932, 40),
    Row(8, 1, 0.005, 0.896, 40),
    Row(4, 1, 0.01, 0.780, 60),
    Row(2, 1, 0.01, 0.775, 60),
    Row(8, 2, 0.02, 0.893, 120),
    Row(8, 3, 0.02, 0.860, 120),
    Row(8, 4, 0.02, 0.80, 120),
]


def config_of(row: Row) -> str:
    """The job of a row as TOML."""
    text = JOB.read_text()
    start, end = text.index("[process]"), text.index("[plane]")
    rule = f'[process]\nmin_feature = "{row.size * PITCH * 1e6:.6f} um"\n\n'
    text = text[:start] + rule + text[end:]
    start, end = text.index("[limits]"), text.index("[solver]")
    limits = f'[limits]\nuniformity_error = "<= {row.error * 100:g} %"\n\n'
    text = text[:start] + limits + text[end:]
    return text.replace("pixels = 256", f"pixels = {CELL}").replace(
        "levels = 8", f"levels = {row.levels}"
    )


def design(config: Path, folder: Path, seed: int) -> float:
    """Run a job; gives back seconds from process start to the saved record."""
    words = ["run", config, "--out", folder, "--seed", seed, "--quiet", "--json"]
    begun = time.monotonic()
    done = subprocess.run([*DOE, *map(str, words)], capture_output=True, text=True)
    if done.returncode > 1:
        raise SystemExit(done.stdout + done.stderr)
    return time.monotonic() - begun


def judge(name: str, row: Row, seed: int, folder: Path, seconds: float) -> bool:
    """Print a row and whether it passes."""
    found = read(folder / "record.h5")
    efficiency, error = light(found)
    breaches, area = 0, 0
    if found["layers"] is not None and row.size > 1:
        breaches = scipy_breaches(found["layers"], row.size)
        subprocess.run([*DOE, "export", str(folder / "record.h5")], check=True, capture_output=True)
        width = int(row.size * PITCH * 1e9)
        area = klayout_breaches(folder / "foundry" / "mask.gds", len(found["layers"]), width)
    passed = (
        efficiency >= row.efficiency
        and error <= row.error
        and seconds <= row.seconds
        and breaches == 0
        and area == 0
    )
    values = (f"{row.efficiency:.4f}", f"{efficiency:.4f}", f"{row.error:.2%}", f"{error:.3%}")
    times = (f"{row.seconds:g}", f"{seconds:.1f}")
    print(
        LINE.format(name, seed, *values, *times, f"{breaches}/{area}", "yes" if passed else "NO"),
        flush=True,
    )
    return passed


def needle_mill(seed: int) -> bool:
    """The needle mill as written, and its sign-off."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name) / "job"
        seconds = design(JOB, folder, seed)
        passed = judge("needle mill as written", Row(8, 1, 0.01, 0.88, 60), seed, folder, seconds)
        subprocess.run([*DOE, "export", str(folder / "record.h5")], check=True, capture_output=True)
        layout = folder / "foundry" / "mask.gds"
        done = subprocess.run(
            [*DOE, "signoff", str(folder / "record.h5"), str(layout), "--json"],
            capture_output=True,
            text=True,
        )
        verdict = json.loads(done.stdout)
        signed = done.returncode == 0 and verdict["worst_order"] <= 1e-5
        print(f"    sign-off: worst order off by {verdict['worst_order']:.1e}, must be <= 1e-5")
        return passed and signed


def main() -> int:
    """Print every row; 1 where one falls short."""
    parser = argparse.ArgumentParser()
    parser.add_argument("--seeds", type=int, default=1)
    parser.add_argument("--quick", action="store_true", help="8 levels only, one seed")
    options = parser.parse_args()
    seeds = range(1, 1 + (1 if options.quick else options.seeds))
    head = ("row", "seed", "eta >=", "got", "U <=", "got", "s <=", "got", "breaches", "pass")
    print(LINE.format(*head))
    passed = True
    for seed in seeds:
        if not options.quick:
            passed &= needle_mill(seed)
        for row in ROWS[2:3] if options.quick else ROWS:
            with tempfile.TemporaryDirectory() as name:
                config, folder = Path(name) / "job.toml", Path(name) / "job"
                config.write_text(config_of(row))
                tomllib.loads(config.read_text())
                seconds = design(config, folder, seed)
                title = f"{row.levels or 'continuous'} levels, d = {row.size}"
                passed &= judge(title, row, seed, folder, seconds)
    return int(not passed)


if __name__ == "__main__":
    sys.exit(main())
