"""Verdicts and figures against the drawn truth, on recordings with seeds that nothing was tuned on.

The truth comes from the drawn geometry alone (`truth.csv`, written by `draw`); this script matches it with the parts by
belt position and holds both against each other:

* among parts more than 0.3 mm from a limit at most 1 wrong verdict in 1000, misses and false rejects counted apart;
* `missing_mm` and `excess_mm` within 0.35 mm (1.4 px) of the truth for 99 % of the parts that were gauged.

    accuracy.py [PARTS] [SEED ...]        defaults: 120 parts, seeds 901 and 902 for each scene
"""

import csv
import json
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parents[2]
PROGRAM = ROOT / "target" / "release" / "beltwright"
LIMITS = {"oat-stars": (2.0, 1.5), "gaskets": None}
NEAR_MM = 0.3
MATCH_MM = 12.0


def limits(settings):
    import tomllib

    shape = tomllib.loads(settings.read_text())["shape"][0]
    return shape["missing_mm"], shape["excess_mm"]


def run(*args):
    done = subprocess.run([PROGRAM, *map(str, args)], capture_output=True, text=True)
    if done.returncode not in (0, 1):
        sys.exit(f"beltwright {' '.join(map(str, args))}: {done.stderr}")
    return done.stdout


def one(scene, parts, seed):
    """One recording: rows of (truth, part) and the truth without a part."""
    settings = ROOT / "config" / f"{scene}.toml"
    with tempfile.TemporaryDirectory() as folder:
        recording = Path(folder) / "recording"
        run("draw", scene, "--settings", settings, "--parts", parts, "--seed", seed, "--out", recording)
        seen = json.loads(run("replay", recording, "--settings", settings, "--check-labels", "--json"))
        truth = list(csv.DictReader((recording / "truth.csv").open()))
    found = [part for part in seen["parts"] if part["part"] is not None]
    where = np.array([[float(part["along_mm"]), float(part["across_mm"])] for part in found])
    pairs, lost = [], []
    for row in truth:
        apart = np.hypot(*(where - [float(row["along_mm"]), float(row["across_mm"])]).T)
        nearest = int(apart.argmin())
        if apart[nearest] <= MATCH_MM:
            pairs.append((row, found[nearest]))
        elif row["kind"] not in ("touching", "partial"):
            lost.append(row)
    return pairs, lost, seen["labels"]


def margin(row, limit):
    """How far the drawn part is from the nearer limit."""
    return min(abs(float(row["missing_mm"]) - limit[0]), abs(float(row["excess_mm"]) - limit[1]))


def main():
    parts = int(sys.argv[1]) if len(sys.argv) > 1 else 120
    seeds = [int(seed) for seed in sys.argv[2:]] or [901, 902]
    failed = False
    for scene in LIMITS:
        limit = limits(ROOT / "config" / f"{scene}.toml")
        errors, clear, misses, false_rejects = {"missing_mm": [], "excess_mm": []}, 0, 0, 0
        for seed in seeds:
            pairs, lost, labels = one(scene, parts, seed)
            misses += sum(row["verdict"] == "reject" for row in lost)
            false_rejects += sum(row["verdict"] == "keep" for row in lost)
            for row, part in pairs:
                if margin(row, limit) > NEAR_MM + 1e-9:
                    clear += 1
                    misses += (row["verdict"], part["verdict"]) == ("reject", "keep")
                    false_rejects += (row["verdict"], part["verdict"]) == ("keep", "reject")
                    if row["verdict"] != part["verdict"]:
                        print("   wrong:", scene, seed, row, part)
                if part["missing_mm"] is None or row["kind"] in ("touching", "partial"):
                    continue
                for key, values in errors.items():
                    values.append(float(part[key]) - float(row[key]))
                    if abs(values[-1]) > 0.35 and len(sys.argv) > 1:
                        print("   off:", scene, seed, key, values[-1], row, part)
            if not labels["agrees"]:
                print("   labels:", scene, seed, labels)
        wrong = misses + false_rejects
        print(f"{scene}: {clear} parts more than {NEAR_MM} mm from a limit: {misses} misses, {false_rejects} false rejects")
        failed |= wrong * 1000 > clear
        for key, values in errors.items():
            off = np.abs(values)
            within = float((off <= 0.35).mean())
            quantiles = np.quantile(off, [0.5, 0.9, 0.99, 1.0]).round(3)
            print(f"   {key}: error median {quantiles[0]}, p90 {quantiles[1]}, p99 {quantiles[2]}, max {quantiles[3]} mm, "
                  f"mean {np.mean(values):+.3f}; within 0.35 mm: {within:.2%} of {len(off)}")
            failed |= within < 0.99
    if failed:
        sys.exit("accuracy fell short")


if __name__ == "__main__":
    main()
