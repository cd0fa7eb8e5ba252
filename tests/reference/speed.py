"""Times the gray stage against OpenCV on one core, interleaved, and prints one JSON line per row.

    cargo build --release --example oracle
    python tests/reference/speed.py target/release/examples/oracle [--repeat 30] [--level NAME] [--record]

`ratio` is how many times faster ours is than the peer, except in rows whose work says `against`: there it is how many times
longer ours takes. `reach` is what it has to reach: at least, or for `against` at most. Times are medians; `best_ms` holds the
shortest of both, which shows whether the machine was busy with something else. Ours is timed inside our process, OpenCV's
around its call. With --record the first line also names the day, the machine and the commit (see benches/record). Exit code 1
if a row with a reach falls short.
"""

import argparse
import datetime
import json
import os
import pathlib
import platform
import subprocess
import sys
import time

import cv2
import numpy as np

import whole_frame
from oracle import Oracle

SIZES = [(1280, 1024), (640, 480), (1920, 1080)]
SQUARES = {15: 1.5, 41: 3, 81: 5, 161: 8, 241: 10}
LEVEL = 30


def frame(width, height, seed=1):
    """Ten bright discs with a bore on an uneven belt with grain."""
    random = np.random.default_rng(seed)
    y, x = np.mgrid[:height, :width]
    belt = 40 + 60 * np.exp(-((x - width / 2) ** 2 + (y - height / 2) ** 2) / (0.5 * width**2))
    radius = width / 32
    for i in range(10):
        cx, cy = (i % 5 + 0.5) * width / 5, (i // 5 + 0.5) * height / 2
        apart = (x - cx) ** 2 + (y - cy) ** 2
        belt[(apart < radius**2) & (apart > 25)] += 90
    return np.clip(belt + random.normal(0, 2, belt.shape), 0, 255).astype(np.uint8)


def opencv_chain(picture, element):
    """Top-hat, threshold, fill by a flood from the border, components with statistics."""
    hat = cv2.morphologyEx(picture, cv2.MORPH_TOPHAT, element)
    _, binary = cv2.threshold(hat, LEVEL, 255, cv2.THRESH_BINARY)
    outside = cv2.copyMakeBorder(binary, 1, 1, 1, 1, cv2.BORDER_CONSTANT, value=0)
    cv2.floodFill(outside, None, (0, 0), 255)
    filled = binary | ~outside[1:-1, 1:-1]
    return cv2.connectedComponentsWithStats(filled, connectivity=8)


def opencv_chain_with_otsu(picture, element):
    """The same with Otsu's level."""
    hat = cv2.morphologyEx(picture, cv2.MORPH_TOPHAT, element)
    _, binary = cv2.threshold(hat, 0, 255, cv2.THRESH_BINARY | cv2.THRESH_OTSU)
    outside = cv2.copyMakeBorder(binary, 1, 1, 1, 1, cv2.BORDER_CONSTANT, value=0)
    cv2.floodFill(outside, None, (0, 0), 255)
    return cv2.connectedComponentsWithStats(binary | ~outside[1:-1, 1:-1], connectivity=8)


class Bench:
    """Measures pairs of jobs in turns, so that whatever else the machine does meets both."""

    def __init__(self, oracle, repeat, level):
        self.oracle, self.repeat, self.level = oracle, repeat, level
        self.short = []

    def ours(self, **request):
        """A job of ours; the first run of a new request warms up."""
        return lambda: self.oracle.ask("time", level=self.level, repeat=2, **request)["ms"][1]

    @staticmethod
    def theirs(call):
        def run():
            call()
            start = time.perf_counter()
            call()
            return (time.perf_counter() - start) * 1e3

        return run

    def row(self, work, ours, peer, reach=None, at_most=False, repeat=None):
        times = [(ours(), peer()) for _ in range(repeat or self.repeat)]
        ours_ms, peer_ms = np.median(times, axis=0)
        ratio = ours_ms / peer_ms if at_most else peer_ms / ours_ms
        best_ms = np.min(times, axis=0).round(4).tolist()
        print(json.dumps({"work": work, "ours_ms": round(ours_ms, 4), "peer_ms": round(peer_ms, 4),
                          "ratio": round(ratio, 2), "reach": reach and round(reach, 2), "best_ms": best_ms}), flush=True)
        if reach and (ratio > reach if at_most else ratio < reach):
            self.short.append(work)


def rows_of_size(bench, width, height):
    """All rows of one picture size. The reach holds at 1280x1024, and within 20 % elsewhere."""
    slack = 1 if (width, height) == SIZES[0] else 1.2
    name = f"{width}x{height}"
    picture = frame(width, height)
    stored = bench.oracle.store(picture)
    squares = {k: np.ones((k, k), np.uint8) for k in SQUARES}
    hat = lambda k: bench.ours(work="top_hat", element=[k, k], **stored)
    stage = lambda threshold: bench.ours(work="stage", element=[81, 81], threshold=threshold, fill=10**9, **stored)
    for k, reach in SQUARES.items():
        opencv = bench.theirs(lambda: cv2.morphologyEx(picture, cv2.MORPH_TOPHAT, squares[k]))
        bench.row(f"{name} top-hat {k} px, OpenCV", hat(k), opencv, reach / slack)
    bench.row(f"{name} top-hat 241 px against 15 px", hat(241), hat(15), 1.3 * slack, at_most=True)
    ellipse = cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (41, 41))
    opencv = bench.theirs(lambda: cv2.morphologyEx(picture, cv2.MORPH_TOPHAT, ellipse))
    bench.row(f"{name} top-hat octagon 41 px, OpenCV ellipse", bench.ours(work="top_hat", element=[41], **stored), opencv,
              20 / slack)
    chain = bench.theirs(lambda: opencv_chain(picture, squares[81]))
    bench.row(f"{name} stage 81 px, OpenCV chain", stage(["fixed", LEVEL]), chain, 8 / slack)
    chain = bench.theirs(lambda: opencv_chain_with_otsu(picture, squares[81]))
    bench.row(f"{name} stage 81 px with Otsu, OpenCV chain", stage(["otsu", 20]), chain, 8 / slack)
    copy = bench.ours(work="copy", **stored)
    bench.row(f"{name} stage 81 px against copying the frame", stage(["fixed", LEVEL]), copy, 12 * slack, at_most=True)
    bench.row(f"{name} stage 81 px with Otsu against copying the frame", stage(["otsu", 20]), copy, at_most=True)


def whole_frame_row(bench):
    """Everything up to the figures of ten parts. The peer's distance maps are made when the shape is taught, as ours are."""
    picture, shape = whole_frame.picture(), whole_frame.taught()
    taught = bench.oracle.store(shape)
    request = bench.oracle.store(picture) | {"element": [81, 81], "threshold": ["fixed", LEVEL], "fill": 10**9,
                                             "taught": taught["picture"], "taught_width": taught["width"]}
    gauge, element = whole_frame.OpenCvGauge(shape), np.ones((81, 81), np.uint8)
    peer = lambda: gauge.parts(opencv_chain(picture, element))
    whole_frame.check_same(bench.oracle.ask("whole_frame", level=bench.level, speck=1, **request)["parts"], peer())
    ours = bench.ours(work="whole_frame", speck=1, **request)
    bench.row("1280x1024 whole frame, 10 parts, OpenCV chain and gauge", ours, bench.theirs(peer), 5)


def other_crates(bench):
    """Two Rust libraries on the same picture, for comparison; they are slow, so few repetitions."""
    width, height = SIZES[0]
    stored = bench.oracle.store(frame(width, height))
    for k in SQUARES:
        ours = bench.ours(work="top_hat", element=[k, k], **stored)
        peer = bench.ours(work="fast_morphology", element=[k, k], **stored)
        bench.row(f"{width}x{height} top-hat {k} px, fast_morphology 0.3", ours, peer, repeat=5)
    ours = bench.ours(work="top_hat", element=[15, 15], **stored)
    peer = bench.ours(work="imageproc", element=[15, 15], **stored)
    bench.row(f"{width}x{height} top-hat 15 px, imageproc 0.27 (opening only)", ours, peer, repeat=3)


def record_head():
    """What a record begins with: when, where and of which commit."""
    here = pathlib.Path(__file__).parent
    git = lambda *words: subprocess.run(["git", *words], cwd=here, capture_output=True, text=True, check=True).stdout.strip()
    models = [line.split(":", 1)[1].strip() for line in open("/proc/cpuinfo") if line.startswith(("model name", "Model"))]
    return {"date": datetime.date.today().isoformat(), "cpu": models[0] if models else platform.machine(),
            "processors": os.cpu_count(), "system": f"{platform.system()} {platform.release()}",
            "commit": git("rev-parse", "--short=12", "HEAD"), "altered": bool(git("status", "--porcelain", "-uno")),
            "load": round(os.getloadavg()[0], 2)}


def main():
    options = argparse.ArgumentParser()
    options.add_argument("oracle")
    options.add_argument("--repeat", type=int, default=30)
    options.add_argument("--level")
    options.add_argument("--record", action="store_true", help="begin with the day, the machine and the commit")
    options = options.parse_args()
    head = record_head() if options.record else {}
    core = max(os.sched_getaffinity(0))
    os.sched_setaffinity(0, {core})
    cv2.setNumThreads(1)
    with Oracle(options.oracle) as oracle:
        level = options.level or oracle.ask("levels")["levels"][-1]
        print(json.dumps(head | {"opencv": cv2.__version__, "level": level, "core": core, "repeat": options.repeat}), flush=True)
        bench = Bench(oracle, options.repeat, level)
        for size in SIZES:
            rows_of_size(bench, *size)
        whole_frame_row(bench)
        other_crates(bench)
    for work in bench.short:
        print(f"falls short: {work}", file=sys.stderr)
    return 1 if bench.short else 0


if __name__ == "__main__":
    sys.exit(main())
