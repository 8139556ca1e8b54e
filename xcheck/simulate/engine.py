"""Which ngspice there is."""

import ctypes.util
import os
from functools import lru_cache
from pathlib import Path

from xcheck.simulate.process import WorkerEnded, answers_of
from xcheck.simulate.types import EngineInfo

LEAST_VERSION = 30
PROBE_SECONDS = 20.0
PROBE_BYTES = 4_000_000_000
FOLDERS = ("/usr/lib", "/usr/lib64", "/usr/local/lib", "/opt/homebrew/lib")
HOW_TO_GET_IT = "install it, on Debian and Ubuntu with `apt-get install ngspice libngspice0`"


def library_path() -> str:
    """The shared library by NGSPICE_LIBRARY_PATH, by the linker's list or in the usual folders; '' for none."""
    given = os.environ.get("NGSPICE_LIBRARY_PATH", "")
    if given:
        return given
    found = ctypes.util.find_library("ngspice")
    if found:
        return found
    for folder in FOLDERS:
        names = sorted([*Path(folder).glob("libngspice.so*"), *Path(folder).glob("*/libngspice.so*")])
        if names:
            return str(names[0])
    return ""


def find_engine() -> EngineInfo:
    """Looks for ngspice by starting a worker with it; cheap when asked again."""
    return _probe(library_path())


@lru_cache(maxsize=8)
def _probe(library: str) -> EngineInfo:
    if not library:
        return EngineInfo(available=False, reason=f"the library libngspice was not found; {HOW_TO_GET_IT}")
    job = {"task": "probe", "memory_bytes": PROBE_BYTES, "cpu_seconds": int(PROBE_SECONDS)}
    try:
        for answer in answers_of(job, library, PROBE_SECONDS):
            if answer["event"] == "engine":
                return _judged(library, answer["version"], answer["code_models"])
            return EngineInfo(available=False, library=library, reason=f"{library}: {answer.get('words', answer)}")
    except WorkerEnded as ended:
        return EngineInfo(available=False, library=library, reason=f"{library}: {ended}")
    return EngineInfo(available=False, library=library, reason=f"{library} gave no answer")


def _judged(library: str, version: str, models: bool) -> EngineInfo:
    number = int(version) if version.isdigit() else 0
    if number < LEAST_VERSION:
        reason = f"ngspice {version or 'of unknown version'} is too old: {LEAST_VERSION} or later is needed"
        return EngineInfo(available=False, version=version, library=library, code_models=models, reason=reason)
    return EngineInfo(available=True, version=version, library=library, code_models=models)
