"""The program itself against a pymodbus server: `replay --armed --line` on the demo belt.

Outside source: pymodbus 3.16 as the device, on a pseudo-terminal (see modbus_peer.py).

    replay_modbus.py PROGRAM
"""

import csv
import json
import re
import signal
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from modbus_peer import Deaf, Garbage, Mute, Peer, Refuse, WrongUnit, all_are_off, check

ROOT = Path(__file__).resolve().parents[2]
RECORDING = ROOT / "demo-frames" / "oat-stars"


class Bench:
    """The demo settings with sending allowed, for a device without parity (a pseudo-terminal has none)."""

    def __init__(self, program, folder):
        self.program, self.folder = program, Path(folder)
        text = (ROOT / "config" / "oat-stars.toml").read_text()
        for key, value in [("allow_armed", "true"), ("parity", '"none"'), ("answer_within_ms", "60.0")]:
            text, found = re.subn(rf"^{key} = .*$", f"{key} = {value}", text, flags=re.M)
            check(found == 1, f"{key} stands once in the settings")
        text = text.replace("../demo-frames", str(ROOT / "demo-frames"))
        self.settings = self.folder / "bench.toml"
        self.settings.write_text(text)

    def command(self, *more):
        return [self.program, "replay", RECORDING, "--settings", self.settings, *more]

    def run(self, name, *more):
        """Exit code, signals, the JSON object (None if there is none), and what was said on stderr."""
        table = self.folder / f"{name}.csv"
        command = self.command("--signals", table, "--json", *more)
        run = subprocess.run(command, capture_output=True, text=True, timeout=120)
        rows = list(csv.DictReader(table.open())) if table.exists() else []
        return run.returncode, rows, json.loads(run.stdout) if run.stdout else None, run.stderr

    def armed(self, peer, name):
        return self.run(name, "--line", peer.port, "--armed")


def plain(bench):
    """Exactly the switches of the dry run, byte for byte, and every coil off before and after."""
    code, dry, _, _ = bench.run("dry")
    check(code == 0 and len(dry) > 5, "the dry run has signals")
    with Peer() as peer:
        code, sent, report, said = bench.armed(peer, "plain")
        all_are_off(peer)
    check(code == 0 and not report["line"]["faults"], report["line"])
    check("not a safety function" in said.lower(), "the cautions are printed")
    check([row["bytes_hex"] for row in sent] == [row["bytes_hex"] for row in dry], "other bytes than the dry run")
    check([row["due_us"] for row in sent] == [row["due_us"] for row in dry], "other moments than the dry run")
    check({row["mode"] for row in sent} == {"sent"}, "mode")
    check(peer.changes(0) == [row["state"] == "on" for row in dry], f"coil 0: {peer.changes(0)}")
    check({coil for _, coil, _ in peer.writes} == {0}, "a coil that is not ours was written")
    late_ms = sorted((int(row["sent_us"]) - int(row["due_us"])) / 1000 for row in sent)
    return f"{len(sent)} signals, sent late by {late_ms[len(late_ms) // 2]:.2f} ms (median), {late_ms[-1]:.2f} ms (worst)"


def with_fault(fault):
    """Something goes wrong for some requests in the middle: survived, reported, everything off."""

    def scenario(bench):
        with Peer(faults=lambda n: fault if 3 <= n < 7 else None) as peer:
            code, _, report, _ = bench.armed(peer, "fault")
            all_are_off(peer)
        check(code == 0, f"exit code {code}")
        check(report["line"]["faults"], "the fault is reported")
        check(report["summary"]["parts"] > 30, "all parts were judged")
        return f"{len(report['line']['faults'])} reported, e.g. «{report['line']['faults'][0]}»"

    return scenario


def nobody_there(bench):
    """A mute device from the start: exit code 3, no ON, and the advice to shut off the air."""
    with Peer(faults=lambda n: Deaf()) as peer:
        code, rows, report, said = bench.armed(peer, "nobody")
        requests = list(peer.requests)
    check(code == 3 and report is None and not rows, f"exit code {code}")
    check("shut off the air" in said, said)
    check(not any(request[1] == 5 and request[4] == 0xFF for request in requests), "an ON went out")
    return said.strip().splitlines()[-1]


def stopped_by_hand(bench):
    """Ctrl-C while an outlet is open: off before the program ends."""
    with Peer() as peer:
        program = subprocess.Popen(bench.command("--line", peer.port, "--armed"), stderr=subprocess.PIPE, text=True)
        until = time.monotonic() + 60
        while not (peer.writes and peer.writes[-1][2]):
            check(time.monotonic() < until, "no outlet opened")
            time.sleep(0.002)
        program.send_signal(signal.SIGINT)
        _, said = program.communicate(timeout=30)
        all_are_off(peer)
    check(program.returncode == 1, f"exit code {program.returncode}: {said}")
    return said.strip().splitlines()[-1]


SCENARIOS = {
    "plain": plain,
    "wrong unit answers": with_fault(WrongUnit()),
    "exceptions": with_fault(Refuse(4)),
    "mute": with_fault(Mute()),
    "garbage": with_fault(Garbage()),
    "nobody there": nobody_there,
    "stopped by hand": stopped_by_hand,
}


def main():
    failed = []
    with tempfile.TemporaryDirectory() as folder:
        bench = Bench(sys.argv[1], folder)
        for name, scenario in SCENARIOS.items():
            try:
                print(f"ok      {name}: {scenario(bench)}", flush=True)
            except AssertionError as error:
                failed.append(name)
                print(f"FAILED  {name}: {error}", flush=True)
    print(f"{len(SCENARIOS) - len(failed)} of {len(SCENARIOS)} scenarios passed")
    sys.exit(1 if failed else 0)


if __name__ == "__main__":
    main()
