"""Starting the worker, feeding it a job, and reading its answers within limits."""

import json
import os
import selectors
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import suppress
from typing import Any

KEPT = ("PATH", "LD_LIBRARY_PATH", "NGSPICE_LIBRARY_PATH", "SPICE_LIB_DIR", "SPICE_SCRIPTS", "PYTHONPATH", "LANG")
"""What the worker sees of the environment; HOME is an empty folder, so that no start-up file is read."""


class WorkerEnded(Exception):
    """The worker ended or was ended before it was done: step ('crash', 'time limit') and words."""

    def __init__(self, step: str, words: str) -> None:
        super().__init__(words)
        self.step = step


def answers_of(job: dict[str, Any], library: str, seconds: float) -> Iterator[dict[str, Any]]:
    """The worker's answers to a job, one by one. Raises WorkerEnded."""
    with tempfile.TemporaryDirectory(prefix="xcheck-") as folder:
        environment = {k: v for k, v in os.environ.items() if k in KEPT}
        environment.update(HOME=folder, TMPDIR=folder, OPENBLAS_NUM_THREADS="1", OMP_NUM_THREADS="1")
        environment["NGSPICE_LIBRARY_PATH"] = library
        worker = subprocess.Popen(
            [sys.executable, "-W", "ignore", "-m", "xcheck.simulate.worker"],
            cwd=folder, env=environment, stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL,
            start_new_session=True,
        )  # fmt: skip
        try:
            yield from _converse(worker, json.dumps(job).encode(), time.monotonic() + seconds, seconds)
        finally:
            with suppress(ProcessLookupError):
                os.killpg(worker.pid, signal.SIGKILL)
            worker.wait()
            for pipe in (worker.stdin, worker.stdout):
                if pipe is not None:
                    with suppress(BrokenPipeError):
                        pipe.close()


def _converse(
    worker: "subprocess.Popen[bytes]", message: bytes, deadline: float, seconds: float
) -> Iterator[dict[str, Any]]:
    """Writes the job while reading answers, so that neither side can block the other."""
    assert worker.stdin is not None and worker.stdout is not None  # noqa: S101, PT018  # both are pipes, see above
    os.set_blocking(worker.stdin.fileno(), False)
    pending = bytearray()
    with selectors.DefaultSelector() as watch:
        watch.register(worker.stdout, selectors.EVENT_READ)
        watch.register(worker.stdin, selectors.EVENT_WRITE)
        while True:
            left = deadline - time.monotonic()
            if left <= 0:
                raise WorkerEnded("time limit", f"ngspice was stopped after {seconds:.0f} s")
            for key, _ in watch.select(left):
                if key.fileobj is worker.stdin:
                    message = _write_some(watch, worker, message)
                    continue
                data = os.read(worker.stdout.fileno(), 1 << 16)
                if not data:
                    raise WorkerEnded("crash", _how_it_ended(worker))
                pending += data
                *lines, rest = pending.split(b"\n")
                pending = bytearray(rest)
                for line in lines:
                    answer = json.loads(line)
                    yield answer
                    if answer["event"] in ("done", "engine") or (answer["event"] == "failed" and _final(answer)):
                        return


def _final(answer: dict[str, Any]) -> bool:
    """After these the worker says no more."""
    return answer["step"] in ("crash", "memory limit")


def _write_some(watch: selectors.BaseSelector, worker: "subprocess.Popen[bytes]", message: bytes) -> bytes:
    pipe = worker.stdin
    if pipe is None:
        return b""
    try:
        sent = os.write(pipe.fileno(), message[: 1 << 16])
    except BlockingIOError:
        return message
    except BrokenPipeError:
        sent = len(message)
    message = message[sent:]
    if not message:
        watch.unregister(pipe)
        with suppress(BrokenPipeError):
            pipe.close()
    return message


def _how_it_ended(worker: "subprocess.Popen[bytes]") -> str:
    code = worker.wait()
    if code < 0:
        name = signal.Signals(-code).name
        if name == "SIGXCPU":
            return "ngspice used up its processor time"
        return f"ngspice ended with signal {name}"
    return f"the worker ended early with status {code}"
