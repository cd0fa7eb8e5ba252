"""Counts the instructions of the stage and of the whole frame on a fixed picture: figures that no noise moves.

    apt-get install valgrind
    cargo build --release --example oracle
    python tests/reference/instructions.py target/release/examples/oracle

One JSON line for each kernel level: millions of instructions for one 1280x1024 picture, and per pixel. Each is the difference
between a run that does the work three times and one that does it once, so that starting up and reading do not count.
Valgrind has no AVX-512 (as of 3.19): under it the program does not see that level, and it is listed as left out.
"""

import json
import re
import subprocess
import sys

import speed
import whole_frame
from oracle import Oracle

CALLGRIND = ["valgrind", "--tool=callgrind", "--callgrind-out-file=/dev/null"]


def answers(program, request):
    """What the oracle answers under callgrind, and how many instructions it took in all."""
    run = subprocess.run([*CALLGRIND, program], input=json.dumps(request) + "\n", capture_output=True, text=True, check=True)
    answer = json.loads(run.stdout.splitlines()[0])
    if "error" in answer:
        raise RuntimeError(f"{answer['error']} at {request}")
    return answer, int(re.search(r"Collected : (\d+)", run.stderr)[1])


def once(program, request):
    """Instructions for doing the work of a `time` request once."""
    one, three = (answers(program, {"op": "time", "repeat": repeat} | request)[1] for repeat in (1, 3))
    return (three - one) / 2


def main():
    program = sys.argv[1]
    valgrind = subprocess.run(["valgrind", "--version"], capture_output=True, text=True, check=True).stdout.strip()
    with Oracle(program) as oracle:
        native = oracle.ask("levels")["levels"]
        seen = answers(program, {"op": "levels"})[0]["levels"]
        picture, taught = oracle.store(whole_frame.picture()), oracle.store(whole_frame.taught())
        stage = picture | {"element": [81, 81], "fill": 10**9, "speck": 1}
        shape = {"taught": taught["picture"], "taught_width": taught["width"]}
        works = {
            "stage": stage | {"work": "stage", "threshold": ["fixed", speed.LEVEL]},
            "stage_otsu": stage | {"work": "stage", "threshold": ["otsu", 20]},
            "whole_frame": stage | shape | {"work": "whole_frame", "threshold": ["fixed", speed.LEVEL]},
        }
        pixels = picture["width"] * picture["height"]
        print(json.dumps({"valgrind": valgrind, "left_out": [level for level in native if level not in seen]}))
        for level in seen:
            counts = {name: once(program, work | {"level": level}) for name, work in works.items()}
            print(json.dumps({"level": level, "millions": {name: round(count / 1e6, 3) for name, count in counts.items()},
                              "per_pixel": {name: round(count / pixels, 2) for name, count in counts.items()}}), flush=True)


if __name__ == "__main__":
    main()
