"""Impedances formed from a raw file that ngspice wrote, against the return ratio."""

import os
import shutil
import subprocess
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from xcheck.deck.reader import read_deck
from xcheck.elaboration import elaborate
from xcheck.impedance.return_ratio import return_ratios
from xcheck.impedance.types import ReturnRatio
from xcheck.results.formed import Formed, impedances
from xcheck.results.rawfile import read_raw
from xcheck.stages import find_amplifiers, split
from xcheck.stages.types import Partition

DECK = """Level probe, {kind}
.subckt oa p n o
rid p n 1meg
e1 a 0 p n 100k
rp a b 1k
cp b 0 15.9u
e2 c 0 b 0 1
ro c o 100
.ends
{source}
{network}
rl out 0 5k
.ac dec 5 1 1meg
.end
"""
INVERTING = "r1 in n 4.7k\nr2 n out 47k\nxu1 0 n out oa"
FOLLOWING = "r1 n 0 4.7k\nr2 n out 47k\nxu1 in n out oa"


def formed_of(folder: Path, source: str, network: str) -> tuple[Partition, Formed]:
    deck = folder / "d.cir"
    deck.write_text(DECK.format(kind="test", source=source, network=network))
    program = shutil.which("ngspice")
    assert program, "ngspice is needed for this test"
    command = [program, "-b", "-r", "r.raw", "d.cir"]
    environment = {**os.environ, "HOME": str(folder)}
    subprocess.run(command, cwd=folder, env=environment, capture_output=True, timeout=30, check=False)
    circuit = elaborate(read_deck(deck), None)
    partition = split(circuit, *find_amplifiers(circuit), band=(10.0, 1e4))
    return partition, impedances(read_raw(folder / "r.raw"), circuit, partition)


@pytest.mark.engine
@pytest.mark.parametrize("source", ["v1 in 0 dc 0 ac 1", "v1 0 in dc 0 ac 2"])
@pytest.mark.parametrize("network", [INVERTING, FOLLOWING])
def test_input_against_return_ratio(tmp_path: Path, source: str, network: str) -> None:
    partition, formed = formed_of(tmp_path, source, network)
    assert set(formed.values) == {"xu1.in"}
    exact = return_ratios(partition, formed.frequency)["xu1.in"]
    assert isinstance(exact, ReturnRatio)
    np.testing.assert_allclose(formed.values["xu1.in"], exact.impedance, rtol=1e-6)
    assert "test current" in formed.not_formed["xu1.out"]


@pytest.mark.engine
@pytest.mark.parametrize(
    ("source", "why"),
    [
        ("v1 in 0 dc 0 ac 1\nv2 aux 0 ac 1\nrx aux 0 1k", "2 sources"),
        ("v1 in 0 dc 0 ac 1\nrx in 0 1k", "also feeds"),
        ("v1 in 0 dc 0\nv2 aux 0 ac 1\nrx aux 0 1k", "no AC voltage source"),
    ],
)
def test_what_the_definition_does_not_support_is_not_formed(tmp_path: Path, source: str, why: str) -> None:
    _, formed = formed_of(tmp_path, source, INVERTING)
    assert not formed.values
    assert why in formed.not_formed["xu1.in"]


@pytest.mark.engine
def test_vectors_that_are_not_saved(tmp_path: Path) -> None:
    partition, _ = formed_of(tmp_path, "v1 in 0 ac 1", INVERTING)
    (plot,) = read_raw(tmp_path / "r.raw")
    bare = impedances([replace(plot, variables=plot.variables[:1])], partition.circuit, partition)
    assert "not both in the file" in bare.not_formed["xu1.in"]
    assert "no AC plot" in impedances([], partition.circuit, partition).not_formed["xu1.in"]
