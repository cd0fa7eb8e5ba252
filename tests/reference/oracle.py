"""Talks to an example program that answers one JSON line, and raw bytes, for every JSON line it is given."""

import json
import os
import pathlib
import subprocess
import tempfile

import numpy as np


class Oracle:
    """A running oracle. Use it in a `with`; `ask` raises what the program reports as an error."""

    def __init__(self, program, **environment):
        self.folder = tempfile.TemporaryDirectory()
        environment = os.environ | environment
        self.process = subprocess.Popen([program], stdin=subprocess.PIPE, stdout=subprocess.PIPE, env=environment)
        self.stored = 0

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self.process.stdin.close()
        self.process.wait(timeout=10)
        self.folder.cleanup()

    def ask(self, op, **request):
        """The answer to a request; its blobs come as arrays of bytes under their names."""
        line = json.dumps({"op": op} | request)
        self.process.stdin.write(line.encode() + b"\n")
        self.process.stdin.flush()
        head = self.process.stdout.readline()
        if not head:
            raise RuntimeError(f"the oracle ended (code {self.process.wait()}) at {line}")
        answer = json.loads(head)
        for name, size in answer.pop("blobs"):
            answer[name] = np.frombuffer(self.process.stdout.read(size), np.uint8)
        if "error" in answer:
            raise RuntimeError(f"{answer['error']} at {line}")
        return answer

    def store(self, picture):
        """Writes a gray picture (uint8, height x width, perhaps a window of a wider one) to a file that requests can name."""
        assert picture.dtype == np.uint8 and picture.ndim == 2
        path = pathlib.Path(self.folder.name) / f"{self.stored}.raw"
        self.stored += 1
        path.write_bytes(np.ascontiguousarray(picture).tobytes())
        height, width = picture.shape
        return {"picture": str(path), "width": width, "height": height}
