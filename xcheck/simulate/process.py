"""Starting the worker, feeding it a job, and reading its answers within limits."""

import json
import os
import selectors
import signal
import site
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator, Sequence
from contextlib import suppress
from pathlib import Path
from typing import IO, Any

PACKAGE_ROOT = Path(__file__).resolve().parents[2]
WORKER = (sys.executable, "-P", "-W", "ignore", "-m", "xcheck.simulate.worker")
KEPT = ("LD_LIBRARY_PATH", "DYLD_LIBRARY_PATH")
KEPT_PATHS = ("SPICE_LIB_DIR", "SPICE_SCRIPTS")
"""What the worker sees of the environment, besides what is set below."""
LAST_STEPS = ("done", "engine")
"""Events after which the worker says no more."""


class WorkerEnded(Exception):
    """The worker ended or was ended before it was done: step ('crash', 'time limit') and words."""

    def __init__(self, step: str, words: str) -> None:
        super().__init__(words)
        self.step = step


def answers_of(
    job: dict[str, Any], library: str, seconds: float, command: Sequence[str] = WORKER
) -> Iterator[dict[str, Any]]:
    """The worker's answers to a job, one by one. Raises WorkerEnded.

    It runs in an empty folder that is deleted afterwards, in a process group of its own, which is killed at the end
    of `seconds` of wall time and whenever the caller stops listening.
    """
    with tempfile.TemporaryDirectory(prefix="xcheck-") as folder, tempfile.TemporaryFile() as complaints:
        worker = subprocess.Popen(
            list(command), cwd=folder, env=environment(folder, library), stdin=subprocess.PIPE,
            stdout=subprocess.PIPE, stderr=complaints, start_new_session=True,
        )  # fmt: skip
        try:
            yield from _Conversation(worker, complaints, seconds).answers(json.dumps(job).encode())
        finally:
            with suppress(ProcessLookupError, PermissionError):
                os.killpg(worker.pid, signal.SIGKILL)
            worker.wait()
            for pipe in (worker.stdin, worker.stdout):
                if pipe is not None:
                    with suppress(BrokenPipeError):
                        pipe.close()


def environment(folder: str, library: str) -> dict[str, str]:
    """A minimal environment: HOME is the empty folder, so that no start-up file is found there; this package and the
    user's own packages can still be imported; one thread."""
    found = {key: os.environ[key] for key in KEPT if key in os.environ}
    found |= {key: os.path.abspath(os.environ[key]) for key in KEPT_PATHS if os.environ.get(key)}
    given = [os.path.abspath(p) for p in os.environ.get("PYTHONPATH", "").split(os.pathsep) if p]
    return found | {
        "HOME": folder, "TMPDIR": folder, "NGSPICE_LIBRARY_PATH": library,
        "PYTHONPATH": os.pathsep.join([str(PACKAGE_ROOT), *given]), "PYTHONUSERBASE": site.getuserbase(),
        "PYTHONDONTWRITEBYTECODE": "1", "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1",
    }  # fmt: skip


class _Conversation:
    """Writes a job and reads the answers at the same time, so that neither side can block the other."""

    def __init__(self, worker: "subprocess.Popen[bytes]", complaints: IO[bytes], seconds: float) -> None:
        self.worker = worker
        self.complaints = complaints
        self.seconds = seconds
        self.deadline = time.monotonic() + seconds
        self.unsent = b""

    def answers(self, message: bytes) -> Iterator[dict[str, Any]]:
        """Answers until the last one. Raises WorkerEnded."""
        self.unsent = message
        pending = b""
        with selectors.DefaultSelector() as watch:
            for pipe, event in ((self.worker.stdout, selectors.EVENT_READ), (self.worker.stdin, selectors.EVENT_WRITE)):
                if pipe is not None:
                    os.set_blocking(pipe.fileno(), False)
                    watch.register(pipe, event)
            while True:
                left = self.deadline - time.monotonic()
                if left <= 0:
                    raise WorkerEnded("time limit", f"ngspice was stopped after {self.seconds:g} s")
                for key, event in watch.select(left):
                    if event & selectors.EVENT_WRITE:
                        self._write(watch)
                        continue
                    data = os.read(key.fd, 1 << 16)
                    if not data:
                        raise self._ended()
                    *lines, pending = (pending + data).split(b"\n")
                    for line in lines:
                        answer = self._read(line)
                        yield answer
                        if answer["event"] in LAST_STEPS:
                            return

    def _read(self, line: bytes) -> dict[str, Any]:
        try:
            answer = json.loads(line)
        except ValueError:
            answer = None
        if not isinstance(answer, dict) or "event" not in answer:
            raise WorkerEnded("crash", f"the answer {line[:60]!r} of the worker makes no sense")
        return answer

    def _write(self, watch: selectors.BaseSelector) -> None:
        pipe = self.worker.stdin
        if pipe is None:
            return
        try:
            sent = os.write(pipe.fileno(), self.unsent[: 1 << 16])
        except BlockingIOError:
            return
        except BrokenPipeError:  # it has ended; what it said is read next
            sent = len(self.unsent)
        self.unsent = self.unsent[sent:]
        if not self.unsent:
            watch.unregister(pipe)
            with suppress(BrokenPipeError):
                pipe.close()

    def _ended(self) -> WorkerEnded:
        """Why the worker ended early, by its status and the last line that it left."""
        try:
            code = self.worker.wait(max(self.deadline - time.monotonic(), 0.1))
        except subprocess.TimeoutExpired:
            return WorkerEnded("time limit", f"ngspice was stopped after {self.seconds:g} s")
        if code == -signal.SIGXCPU:
            return WorkerEnded("time limit", "ngspice used up its processor time")
        if code < 0:
            return WorkerEnded("crash", f"ngspice ended with signal {_signal_name(-code)}")
        self.complaints.seek(0)
        left = self.complaints.read()[-2000:].decode("utf-8", "replace").strip().splitlines()
        return WorkerEnded("crash", f"the worker ended early with status {code}" + (f": {left[-1]}" if left else ""))


def _signal_name(number: int) -> str:
    try:
        return signal.Signals(number).name
    except ValueError:
        return str(number)
