"""Which ngspice there is."""

import ctypes.util
import os
import sys
from collections.abc import Sequence
from functools import lru_cache
from pathlib import Path

from xcheck.simulate.process import WORKER, WorkerEnded, answers_of
from xcheck.simulate.types import EngineInfo

LEAST_VERSION = 30
PROBE_SECONDS = 20.0
PROBE_BYTES = 4_000_000_000
FOLDERS = ("/usr/lib", "/usr/lib64", "/usr/local/lib", f"{sys.prefix}/lib", "/opt/homebrew/lib")
GIVEN_BY = "NGSPICE_LIBRARY_PATH"
HOW_TO_GET_IT = "install it, on Debian and Ubuntu with `apt-get install ngspice libngspice0`"
LATER = f"version {LEAST_VERSION} or later is needed"


def library_path(folders: Sequence[str] = FOLDERS) -> str:
    """The shared library by NGSPICE_LIBRARY_PATH, by the linker's list or in the usual folders; '' for none.

    Without its development package the library goes by `libngspice.so.0`, which PySpice does not look for.
    """
    given = os.environ.get(GIVEN_BY, "")
    if given:
        return os.path.abspath(given) if os.sep in given else given
    found = ctypes.util.find_library("ngspice")
    if found:
        return found
    for folder in map(Path, folders):
        names = sorted(p for ending in ("so*", "dylib") for p in folder.glob(f"libngspice.{ending}"))
        names += sorted(folder.glob("*/libngspice.so*"))
        if names:
            return str(names[0])
    return ""


def find_engine() -> EngineInfo:
    """Looks for ngspice by starting a worker with it; asked again in the same environment, it remembers."""
    return probed(library_path(), os.environ.get("SPICE_LIB_DIR", ""))


@lru_cache(maxsize=8)
def probed(
    library: str, scripts: str = "", command: Sequence[str] = WORKER, seconds: float = PROBE_SECONDS
) -> EngineInfo:
    """What a worker says of a library. scripts: the user's SPICE_LIB_DIR, by which code models are found."""
    if not library:
        return EngineInfo(available=False, reason=f"the library libngspice was not found; {HOW_TO_GET_IT}")
    job = {"task": "probe", "memory_bytes": PROBE_BYTES, "cpu_seconds": int(seconds) + 1}
    reason = "it gave no answer"
    try:
        for answer in answers_of(job, library, seconds, command):
            if answer["event"] == "engine":
                return _judged(library, str(answer["version"]), bool(answer["code_models"]))
            reason = str(answer.get("words", reason))
            break
    except WorkerEnded as ended:
        reason = str(ended)
    named = f" (given by {GIVEN_BY})" if os.environ.get(GIVEN_BY) else ""
    return EngineInfo(available=False, library=library, reason=f"{library}{named} cannot be used: {reason}")


def _judged(library: str, version: str, models: bool) -> EngineInfo:
    number = int(version) if version.isdigit() else 0
    reason = ""
    if not number:
        reason = f"{library} does not say which version of ngspice it is; {LATER}"
    elif number < LEAST_VERSION:
        reason = f"ngspice {version} is too old: {LATER}"
    return EngineInfo(not reason, version, library, code_models=models, reason=reason)
