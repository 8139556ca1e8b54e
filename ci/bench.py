"""Prints how long the analytic way takes as decks grow, and how long ngspice would for the same ports.

    python ci/bench.py [STAGES...]      sizes of the decks, 10 100 1000 10000 where none is given

Each deck has inverting stages in chains of five, each amplifier an instance of one linear subcircuit with input
resistance, one pole and output resistance. All ports, 61 frequencies. ngspice runs one `ac` a port; that is
measured on a few runs on the same deck, loading left out, and multiplied by the number of ports.
"""

import json
import math
import resource
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate
from xcheck.impedance.return_ratio import return_ratios
from xcheck.impedance.types import ReturnRatio
from xcheck.stages import find_amplifiers, split

SIZES = (10, 100, 1_000, 10_000)
FREQUENCY = 10 ** np.linspace(0, 6, 61)
STEPS = ("read", "elaborate", "find", "split", "solve")
NGSPICE_LIMIT = 600.0

AMPLIFIER = """\
.subckt gauge_amp inp inn vp vn out
rid inp inn 2meg
e1 1 0 inp inn 200k
rp 1 2 1k
cp 2 0 31.8u
e2 3 0 2 0 1
ro 3 out 75
.ends gauge_amp
"""


def deck_of(stages: int) -> str:
    """The deck of some stages, values spread so that no two chains are alike."""
    lines = ["chains of five inverting stages", AMPLIFIER.rstrip(), "vp vp 0 12", "vn vn 0 -12"]
    for n in range(stages):
        chain, place = divmod(n, 5)
        source = f"in{chain}" if place == 0 else f"o{n - 1}"
        if place == 0:
            lines.append(f"vin{chain} in{chain} 0 dc 0")
        lines.append(f"r1_{n} {source} m{n} {10_000 + n % 97}")
        lines.append(f"rf_{n} m{n} o{n} {20_000 + n % 89}")
        lines.append(f"xu{n} 0 m{n} vp vn o{n} gauge_amp")
        if place == 4 or n == stages - 1:
            lines.append(f"rl{chain} o{n} 0 10k")
    return "\n".join([*lines, ".ac dec 10 1 1meg", ".end"]) + "\n"


def measure(stages: int) -> dict[str, float]:
    """Seconds of each step, and the peak memory of this process in MB."""
    text = deck_of(stages)
    marks = [time.perf_counter()]
    deck = read_text(text)
    marks.append(time.perf_counter())
    circuit = elaborate(deck)
    marks.append(time.perf_counter())
    amplifiers, findings = find_amplifiers(circuit)
    marks.append(time.perf_counter())
    partition = split(circuit, amplifiers, findings)
    marks.append(time.perf_counter())
    answers = return_ratios(partition, FREQUENCY)
    marks.append(time.perf_counter())
    missing = [f"{s}: {a}" for s, a in answers.items() if not isinstance(a, ReturnRatio)]
    if missing or len(answers) < 2 * stages:
        raise SystemExit(f"{len(answers)} ports of {stages} stages, {len(missing)} without answer: {missing[:3]}")
    seconds = dict(zip(STEPS, np.diff(marks).tolist(), strict=True))
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    return {**seconds, "total": marks[-1] - marks[0], "ports": len(answers), "megabytes": peak}


def ngspice_seconds(stages: int, runs: int) -> float:
    """Seconds of an ngspice process that loads the deck and makes some `ac` runs."""
    start, _, rest = deck_of(stages).partition("\nvin0 in0 0 dc 0")
    control = "\n".join([".control", *["ac dec 10 1 1meg"] * runs, "quit", ".endc"])
    text = f"{start}\nvin0 in0 0 dc 0 ac 1{rest}".replace(".end\n", f".save v(in0) i(vin0)\n{control}\n.end\n")
    with tempfile.TemporaryDirectory() as folder:
        Path(folder, "bench.cir").write_text(text)
        begin = time.perf_counter()
        done = subprocess.run(
            ["ngspice", "-b", "-n", "bench.cir"],
            cwd=folder,
            capture_output=True,
            text=True,
            timeout=NGSPICE_LIMIT,
            check=False,
        )
        seconds = time.perf_counter() - begin
    if done.stdout.count(f"No. of Data Rows : {len(FREQUENCY)}") != runs:
        raise SystemExit(f"ngspice did not make {runs} runs: {done.stdout[-500:]} {done.stderr[-500:]}")
    return seconds


def ngspice_a_port(stages: int) -> float | None:
    """Seconds of one `ac` run, the mean of a few, without loading; None where it takes too long."""
    more = 20 if stages <= 100 else 3 if stages <= 1000 else 1
    try:
        return max(ngspice_seconds(stages, 1 + more) - ngspice_seconds(stages, 1), 0.0) / more
    except subprocess.TimeoutExpired:
        return None


def main(arguments: list[str]) -> None:
    if arguments[:1] == ["--one"]:
        print(json.dumps(measure(int(arguments[1]))))
        return
    sizes = [int(a) for a in arguments] or list(SIZES)
    print("seconds a step; growth: exponent of the total against the deck before; memory: peak of the process")
    print(f"{'stages':>7} {'ports':>6} " + " ".join(f"{s:>9}" for s in STEPS) + "     total growth memory/MB")
    before: tuple[int, float] | None = None
    rows: list[tuple[int, dict[str, float]]] = []
    for size in sizes:
        call = [sys.executable, __file__, "--one", str(size)]
        row = json.loads(subprocess.run(call, check=True, capture_output=True, text=True).stdout)
        growth = "" if before is None else f"{math.log(row['total'] / before[1]) / math.log(size / before[0]):.2f}"
        steps = " ".join(f"{row[s]:9.3f}" for s in STEPS)
        print(
            f"{size:7} {row['ports']:6.0f} {steps} {row['total']:9.3f} {growth:>6} {row['megabytes']:9.0f}", flush=True
        )
        before = (size, row["total"])
        rows.append((size, row))
    if shutil.which("ngspice") is None:
        print("ngspice is not there, so there is nothing to hold this against")
        return
    print("\nngspice, one `ac` a port: measured on a few runs on the same deck without its loading, times the ports")
    print(f"{'stages':>7} {'ports':>6} {'one run':>10} {'all ports':>12} {'times ours':>11}")
    for size, row in rows:
        one = ngspice_a_port(size)
        if one is None:
            print(f"{size:7} {row['ports']:6.0f}   a few runs take more than {NGSPICE_LIMIT:.0f} s")
            continue
        whole = one * row["ports"]
        print(f"{size:7} {row['ports']:6.0f} {one:10.4f} {whole:12.1f} {whole / row['total']:11.0f}", flush=True)


if __name__ == "__main__":
    main(sys.argv[1:])
