"""Our Modbus RTU line against a pymodbus server on a pseudo-terminal.

Outside source: pymodbus 3.16 (its RTU framer, CRC and simulated device). Its compute_CRC returns the two bytes in the
order in which they go over the wire.

    modbus_peer.py LINE_ORACLE      the built example `line_oracle`
"""

import asyncio
import csv
import io
import json
import logging
import os
import random
import select
import subprocess
import sys
import threading
import time
import tty

from pymodbus import FramerType
from pymodbus.constants import ExcCodes
from pymodbus.framer.rtu import FramerRTU
from pymodbus.pdu import DecodePDU
from pymodbus.pdu.bit_message import WriteMultipleCoilsRequest, WriteSingleCoilRequest
from pymodbus.server import ModbusSerialServer
from pymodbus.simulator import DataType, SimData, SimDevice

logging.getLogger("pymodbus.logging").setLevel(logging.CRITICAL)


def sealed(body):
    """Body and CRC, as they go over the wire."""
    return body + FramerRTU.compute_CRC(body).to_bytes(2, "big")


class Fault:
    """What becomes of a request on its way to the device, and of the answer on its way back. Here: nothing goes wrong."""

    def request(self, request):
        return request

    def answer(self, request, answer):
        return answer


class Deaf(Fault):
    """Requests do not arrive: a cut wire."""

    def request(self, request):
        return b""


class Mute(Fault):
    """Requests are carried out, answers do not arrive."""

    def answer(self, request, answer):
        return b""


class WrongUnit(Fault):
    """A device with another address answers."""

    def answer(self, request, answer):
        return sealed(bytes([answer[0] + 1]) + answer[1:-2])


class WrongCoil(Fault):
    """The answer names another coil."""

    def answer(self, request, answer):
        return sealed(answer[:3] + bytes([answer[3] ^ 0x40]) + answer[4:-2])


class Garbage(Fault):
    """Noise in place of the answer."""

    def __init__(self, seed=3):
        self.random = random.Random(seed)

    def answer(self, request, answer):
        return self.random.randbytes(self.random.randint(1, 60))


class Cut(Fault):
    """The answer stops in the middle."""

    def answer(self, request, answer):
        return answer[:5]


class Echo(Fault):
    """The adapter reads back what it sends."""

    def answer(self, request, answer):
        return request + answer


class Refuse(Fault):
    """The device answers with an exception and does nothing."""

    def __init__(self, code, functions=(5, 15)):
        self.code = code
        self.functions = functions


class Peer:
    """A Modbus device with coils on a serial port, and a wire on which things can go wrong.

    `with Peer(unit=1, coils=range(16)) as peer:` opens `peer.port` for the program to be tested. `peer.faults` maps the
    number of a request, counted from 0, to a Fault; a callable does as well. `peer.writes` holds `(time, coil, state)`
    for each coil written, in order; `peer.requests` the bytes of each request that came, whether or not it got through.

    A device says nothing to requests for other units. pymodbus answers them with exception 04, so they are kept from it
    unless `answers_for_others`.
    """

    def __init__(self, unit=1, coils=range(16), faults=None, answers_for_others=False):
        self.unit = unit
        self.coils = coils
        self.faults = faults if callable(faults) else (faults or {}).get
        self.answers_for_others = answers_for_others
        self.writes = []
        self.requests = []
        self.answers = []
        self._fault = Fault()

    def __enter__(self):
        # Program <-> near pseudo-terminal <-> wire <-> far pseudo-terminal <-> server. The ends that the two open are
        # kept open here too, so that closing them does not end the wire.
        self.near, self._near_end = os.openpty()
        self.far, self._far_end = os.openpty()
        for end in (self._near_end, self._far_end):
            tty.setraw(end)
        self.port = os.ttyname(self._near_end)
        self._stop, self._stopper = os.pipe()
        self._ready = threading.Event()
        self._threads = [threading.Thread(target=self._serve), threading.Thread(target=self._wire)]
        for thread in self._threads:
            thread.start()
        if not self._ready.wait(10):
            raise RuntimeError("the pymodbus server did not start")
        return self

    def __exit__(self, *_):
        os.write(self._stopper, b"x")
        self._loop.call_soon_threadsafe(self._ended.set)
        for thread in self._threads:
            thread.join(10)
        for end in (self.near, self._near_end, self.far, self._far_end, self._stop, self._stopper):
            os.close(end)

    def coil_states(self):
        """Every coil as the server's own memory has it."""
        future = asyncio.run_coroutine_threadsafe(self._read_all(), self._loop)
        return future.result(10)

    def changes(self, coil):
        """The states that a coil went through, repetitions left out; it starts off."""
        seen = [False]
        for _, written, state in self.writes:
            if written == coil and state != seen[-1]:
                seen.append(state)
        return seen[1:]

    async def _read_all(self):
        first, count = self.coils.start, len(self.coils)
        bits = await self._server.async_getValues(self.unit, 1, first, count)
        return dict(zip(self.coils, bits))

    def _serve(self):
        asyncio.run(self._server_until_end())

    async def _server_until_end(self):
        self._loop = asyncio.get_running_loop()
        self._ended = asyncio.Event()
        bits = [SimData(0, values=[False] * self.coils.stop, datatype=DataType.BITS)]
        spare = lambda kind: [SimData(0, datatype=kind)]
        blocks = (bits, spare(DataType.BITS), spare(DataType.REGISTERS), spare(DataType.REGISTERS))
        self._server = ModbusSerialServer(
            SimDevice(self.unit, simdata=blocks, action=self._action),
            framer=FramerType.RTU,
            port=os.ttyname(self._far_end),
            baudrate=115200,
            parity="N",  # a pseudo-terminal has no parity bit, and says so
        )
        await self._server.serve_forever(background=True)
        self._ready.set()
        await self._ended.wait()
        await self._server.shutdown()

    async def _action(self, function, _start, address, _count, _registers, values):
        if values is None:
            return None
        if isinstance(self._fault, Refuse) and function in self._fault.functions:
            return ExcCodes(self._fault.code)
        now = time.monotonic()
        self.writes.extend((now, address + i, bool(state)) for i, state in enumerate(values))
        return None

    def _wire(self):
        while True:
            ready, _, _ = select.select([self._stop, self.near, self.far], [], [])
            if self._stop in ready:
                return
            if self.near in ready:
                request = os.read(self.near, 256)
                self._fault = self.faults(len(self.requests)) or Fault()
                self.requests.append(request)
                if request[0] == self.unit or self.answers_for_others:
                    self._pass_on(self.far, self._fault.request(request))
            if self.far in ready:
                answer = os.read(self.far, 256)
                self.answers.append(answer)
                self._pass_on(self.near, self._fault.answer(self.requests[-1], answer))

    @staticmethod
    def _pass_on(end, data):
        if data:
            os.write(end, data)


# ---------------------------------------------------------------------------------------------------------------------


def check(condition, text):
    if not condition:
        raise AssertionError(text)


def frames_and_crc(oracle):
    """Frames and CRCs of 4 000 seeded requests."""
    rng = random.Random(20)
    framer = FramerRTU(DecodePDU(False))
    lines, expected = [], []
    for _ in range(2000):
        unit, coil = rng.randint(1, 247), rng.randint(0, 65535 - 64)
        states = [rng.random() < 0.5 for _ in range(rng.choice([1, 1, 2, 7, 8, 9, 16, 17, 64]))]
        function = 5 if len(states) == 1 and rng.random() < 0.5 else 15
        request = (WriteSingleCoilRequest if function == 5 else WriteMultipleCoilsRequest)(
            address=coil, bits=states, dev_id=unit
        )
        expected.append(framer.buildFrame(request).hex(" ").upper())
        lines.append(f"{unit} {function} {coil} {''.join('01'[s] for s in states)}")
    for _ in range(2000):
        data = rng.randbytes(rng.randint(1, 40))
        expected.append(sealed(data)[-2:].hex(" ").upper())
        lines.append(f"crc {data.hex()}")
    run = subprocess.run([oracle, "frames"], input="\n".join(lines), capture_output=True, text=True, check=True)
    came = run.stdout.splitlines()
    wrong = [(l, c, e) for l, c, e in zip(lines, came, expected, strict=True) if c != e]
    check(not wrong, f"{len(wrong)} differ, first {wrong[:1]}")


COILS = [0, 1, 2, 5, 9]


def random_switches(seed, count, every_ms):
    """Switches as `(due_ms, changed, on)` with outlets by index; the last one turns off what is on."""
    rng = random.Random(seed)
    state, switches = [False] * len(COILS), []
    for n in range(count):
        changed = sorted(rng.sample(range(len(COILS)), rng.choice([1, 1, 2, 3])))
        for outlet in changed:
            state[outlet] = not state[outlet]
        switches.append((every_ms * (n + 1), changed, [i for i, s in enumerate(state) if s]))
    left = [i for i, s in enumerate(state) if s]
    return switches + [(every_ms * (count + 1), left, [])] if left else switches


def play(oracle, peer, switches, unit=1, baud=115200, answer_ms=60):
    """Plays the switches; exit code, signals and report."""
    listed = lambda outlets: ",".join(map(str, outlets)) or "-"
    text = "\n".join(f"{due} {listed(changed)} {listed(on)}" for due, changed, on in switches)
    command = [oracle, "play", peer.port, unit, baud, answer_ms, ",".join(map(str, COILS))]
    run = subprocess.run([str(c) for c in command], input=text, capture_output=True, text=True, timeout=120)
    check(run.returncode in (0, 3), f"exit code {run.returncode}: {run.stderr}")
    signals = list(csv.DictReader(io.StringIO(run.stdout)))
    return run.returncode, signals, json.loads(run.stderr.splitlines()[-1])


def all_are_off(peer):
    on = [coil for coil, state in peer.coil_states().items() if state]
    check(not on, f"coils {on} are still on")


def expected_changes(switches, index):
    return [index in on for _, changed, on in switches if index in changed]


def plain(oracle):
    """Without faults: exactly the expected coils, and the very bytes of signals.csv."""
    switches = random_switches(seed=1, count=60, every_ms=60)
    with Peer() as peer:
        code, signals, report = play(oracle, peer, switches, answer_ms=500)
        all_are_off(peer)
    check(code == 0 and not report["faults"], report)
    for index, coil in enumerate(COILS):
        check(peer.changes(coil) == expected_changes(switches, index), f"coil {coil}: {peer.changes(coil)}")
    others = {coil for _, coil, _ in peer.writes} - set(COILS)
    check(not others, f"coils that are not ours were written: {others}")
    said = [row["bytes_hex"] for row in signals]
    said = [hexed for i, hexed in enumerate(said) if i == 0 or (hexed, signals[i]["due_us"]) != (said[i - 1], signals[i - 1]["due_us"])]
    came = [request.hex(" ").upper() for request in peer.requests]
    check(said == came, "signals.csv and the wire differ")
    check({row["mode"] for row in signals} == {"sent"}, "mode")
    late_ms = sorted((int(row["sent_us"]) - int(row["due_us"])) / 1000 for row in signals)
    return f"{len(came)} requests, sent late by {late_ms[len(late_ms) // 2]:.2f} ms (median), {late_ms[-1]:.2f} ms (worst)"


def with_fault(fault, counter, requests, carried_out=True):
    """A fault on some requests in the middle: survived, counted, everything off."""

    def scenario(oracle):
        switches = random_switches(seed=2, count=20, every_ms=80)
        with Peer(faults=lambda n: fault if n in requests else None) as peer:
            code, _, report = play(oracle, peer, switches)
            all_are_off(peer)
        counts = report["counts"]
        check(code == 0, report)
        check(counts[counter] == len(requests), f"{counter}: {counts}, expected {len(requests)}")
        check(len(report["faults"]) >= len(requests), report)
        check(not report["may_be_on"], report)
        check(counts["repeats"] > 0, f"no OFF was repeated: {counts}")
        for index, coil in enumerate(COILS):
            came, wanted = peer.changes(coil), expected_changes(switches, index)
            if carried_out:
                check(came == wanted, f"coil {coil}: {came} in place of {wanted}")
            check(came.count(True) <= wanted.count(True), f"coil {coil} was on more often than asked")
        return f"{counts['repeats']} repeats, {counts['on_unconfirmed']} ON unconfirmed, e.g. «{report['faults'][0]}»"

    return scenario


def never_there(word, **wrong):
    """Nobody who answers rightly from the start: nothing is switched on, and it is said."""

    def scenario(oracle):
        with Peer(**wrong) as peer:
            code, signals, report = play(oracle, peer, random_switches(3, 4, 60), answer_ms=20)
        check(code == 3, report)
        check(not any(state for _, _, state in peer.writes), "a coil was switched on")
        check({row["state"] for row in signals} == {"off"}, "only OFF may go out")
        check("may still be open, shut off the air" in report["error"], report)
        check(any(word in fault for fault in report["faults"]), f"{word!r} not in {report['faults'][:2]}")
        return f"«{report['faults'][0]}»"

    return scenario


def gone_for_good(oracle):
    """The wire is cut while an outlet is on: it stays on, and that is said."""
    switches = [(50, [0], [0]), (100, [0], [])]
    with Peer(faults=lambda n: Deaf() if n > 3 else None) as peer:
        code, _, report = play(oracle, peer, switches, answer_ms=20)
        states = peer.coil_states()
    check(states[0], "the check needs an outlet that is on")
    check(code == 3 and report["may_be_on"] == [0], report)
    check("coils [0] did not confirm OFF" in report["error"], report)
    return f"«{report['error']}»"


def only_single_coils(oracle):
    """A device that refuses FC15 is spoken to in FC05."""
    switches = random_switches(seed=4, count=20, every_ms=80)
    with Peer(faults=lambda n: Refuse(1, functions=(15,))) as peer:
        code, _, report = play(oracle, peer, switches, answer_ms=500)
        all_are_off(peer)
    check(code == 0 and report["counts"]["exceptions"] > 0, report)
    for index, coil in enumerate(COILS):
        check(peer.changes(coil) == expected_changes(switches, index), f"coil {coil}: {peer.changes(coil)}")
    return f"{report['counts']['exceptions']} refused, then FC05"


def echoing_adapter(oracle):
    """An adapter with echo: taken off, everything is acknowledged by the device itself."""
    switches = random_switches(seed=5, count=20, every_ms=80)
    with Peer(faults=lambda n: Echo()) as peer:
        code, _, report = play(oracle, peer, switches, answer_ms=500)
        all_are_off(peer)
    counts = report["counts"]
    check(code == 0 and not report["faults"], report)
    check(counts["echoes"] == counts["requests"] == counts["acknowledged"], counts)
    for index, coil in enumerate(COILS):
        check(peer.changes(coil) == expected_changes(switches, index), f"coil {coil}: {peer.changes(coil)}")
    return f"{counts['echoes']} echoes taken off"


MIDDLE = range(8, 24)

SCENARIOS = {
    "frames and CRC": frames_and_crc,
    "plain": plain,
    "mute": with_fault(Mute(), "no_answer", MIDDLE),
    "cut wire": with_fault(Deaf(), "no_answer", MIDDLE, carried_out=False),
    "wrong unit answers": with_fault(WrongUnit(), "wrong_unit", MIDDLE),
    "wrong coil answered": with_fault(WrongCoil(), "wrong_content", MIDDLE),
    "garbage": with_fault(Garbage(), "garbled", MIDDLE),
    "answer cut short": with_fault(Cut(), "garbled", MIDDLE),
    "device busy": with_fault(Refuse(6), "exceptions", MIDDLE, carried_out=False),
    "device failure": with_fault(Refuse(4), "exceptions", MIDDLE, carried_out=False),
    "FC05 only": only_single_coils,
    "echoing adapter": echoing_adapter,
    "nobody there": never_there("no answer within", faults=lambda n: Deaf()),
    "another unit is set": never_there("no answer within", unit=7),
    "another unit is set, gateway": never_there("server device failure", unit=7, answers_for_others=True),
    "always refused": never_there("illegal data address", faults=lambda n: Refuse(2)),
    "always garbage": never_there("the answer", faults=lambda n: Garbage(n)),
    "gone for good": gone_for_good,
}


def main():
    oracle = sys.argv[1]
    failed = []
    for name, scenario in SCENARIOS.items():
        try:
            print(f"ok      {name}: {scenario(oracle) or 'equal'}", flush=True)
        except AssertionError as error:
            failed.append(name)
            print(f"FAILED  {name}: {error}", flush=True)
    print(f"{len(SCENARIOS) - len(failed)} of {len(SCENARIOS)} scenarios passed")
    sys.exit(1 if failed else 0)


if __name__ == "__main__":
    main()
