"""Comments and continuations, each as ngspice itself reads it: a divider's values asked back."""

import re
import subprocess
from pathlib import Path

import pytest

from xcheck.circuit.elements import Passive
from xcheck.deck.reader import read_text
from xcheck.elaboration import elaborate

LINES = [
    "R1 a 0 3k;c 5k", "R2 a 0 3k ; 5k", "R3 a 0 3k $ 5k", "R4 a 0 3k // 5k", "R5 a 0 3k//5k", "R6 a 0\n+ 3k",
    "R7 a 0\n* between\n+ 3k", "R8 a 0\n\n+ 3k", "R9 a 0 3k\n  * indented comment", "R10 a 0 3k\n;only a comment",
    "R11 a 0 3k\n$ only a comment", "R12 a 0 3k\n// only a comment", "  R13 a 0 3k", "\tR14\ta\t0\t3k", "r15 A GND 3K",
    "R16 a 0 r=3k", "R17 a 0 {3k}", "R18 a 0 '3k'", "R19 a 0 R = 3k", "R20 a 0 {1k + 2k}", "R21 a, 0, 3k",
    "R22 a 0 1k 3k", "R23 a 0 3000", "R24 a 0 3e3", "R25 a 0 +3k",
]  # fmt: skip


@pytest.mark.engine
def test_lines_read_as_in_ngspice(tmp_path: Path) -> None:
    body = "\n".join(LINES)
    asked = "\n".join(f"print @r{k}[resistance]" for k in range(1, len(LINES) + 1))
    (tmp_path / "d.cir").write_text(f"title\nv1 a 0 1\n{body}\n.control\nop\n{asked}\n.endc\n.end\n")
    done = subprocess.run(
        ["ngspice", "-b", "d.cir"], cwd=tmp_path, capture_output=True, text=True, timeout=60, check=False
    )
    taken = {f"r{k}": float(v) for k, v in re.findall(r"@r(\d+)\[resistance\] = (\S+)", done.stdout)}
    assert len(taken) == len(LINES), done.stdout[-800:] + done.stderr[-800:]
    circuit = elaborate(read_text(f"title\nv1 a 0 1\n{body}\n.end\n"))
    read = {e.name: e.value for e in circuit.elements if isinstance(e, Passive)}
    assert read == pytest.approx(taken)
