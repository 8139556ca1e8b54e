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
    assert "reaches the stage at in too" in formed.not_formed["xu1.out"]


@pytest.mark.engine
@pytest.mark.parametrize("source", ["i1 0 out dc 0 ac 1", "i1 out 0 dc 0 ac 2m", "v1 t 0 dc 0 ac 1\nrt t out 1k"])
@pytest.mark.parametrize("network", [INVERTING, FOLLOWING])
def test_output_against_return_ratio(tmp_path: Path, source: str, network: str) -> None:
    partition, formed = formed_of(tmp_path, f"vin in 0 0\n{source}\ncl out 0 1n", network)
    assert set(formed.values) == {"xu1.out"}
    exact = return_ratios(partition, formed.frequency)["xu1.out"]
    assert isinstance(exact, ReturnRatio)
    np.testing.assert_allclose(formed.values["xu1.out"], exact.impedance, rtol=1e-6)


@pytest.mark.engine
@pytest.mark.parametrize(
    ("source", "network"),
    [
        ("v1 in 0 dc 0 ac 1\nrx in 0 1k", INVERTING),  # what else hangs on the source is counted
        ("v1 s 0 dc 0 ac 1\nrs s in 600", FOLLOWING),
        ("i1 0 in dc 0 ac 1u\ncd in 0 10p\nrd in 0 1meg", FOLLOWING),
        ("v1 s 0 dc 0 ac 1\nxu0 s in in oa", INVERTING),  # driven by the stage before it
    ],
)
def test_inputs_behind_other_things(tmp_path: Path, source: str, network: str) -> None:
    partition, formed = formed_of(tmp_path, source, network)
    exact = return_ratios(partition, formed.frequency)
    assert "xu1.in" in formed.values, formed.not_formed
    for subject, value in formed.values.items():
        road = exact[subject]
        assert isinstance(road, ReturnRatio)
        np.testing.assert_allclose(value, road.impedance, rtol=1e-5)


@pytest.mark.engine
@pytest.mark.parametrize(
    ("source", "why"),
    [
        ("v1 in 0 dc 0 ac 1\nv2 aux 0 ac 1\nrx aux 0 1k", "2 sources"),
        ("v1 in 0 dc 0\nv2 aux 0 ac 1\nrx aux 0 1k", "does not drive it"),
        ("v1 in 0 dc 0 ac 1\nrx in out 1meg\nrz out 0 1k", "reaches the stage at"),
        ("v1 in 0 dc 0 ac 1\nt1 in 0 far 0 z0=50 td=1n\nrf far 0 50", "does not follow from the file"),
    ],
)
def test_what_the_definition_does_not_support_is_not_formed(tmp_path: Path, source: str, why: str) -> None:
    _, formed = formed_of(tmp_path, source, INVERTING)
    assert "xu1.in" not in formed.values or why == "reaches the stage at"
    assert any(why in reason for reason in formed.not_formed.values()), formed.not_formed


@pytest.mark.engine
def test_vectors_that_are_not_saved(tmp_path: Path) -> None:
    partition, _ = formed_of(tmp_path, "v1 in 0 ac 1", INVERTING)
    (plot,) = read_raw(tmp_path / "r.raw")
    bare = impedances([replace(plot, variables=plot.variables[:1])], partition.circuit, partition)
    assert "v(in) is not in the file" in bare.not_formed["xu1.in"]
    assert "no AC plot" in impedances([], partition.circuit, partition).not_formed["xu1.in"]


@pytest.mark.engine
def test_a_file_of_another_deck_is_doubted(tmp_path: Path) -> None:
    partition, formed = formed_of(tmp_path, "v1 in 0 ac 1", INVERTING)
    assert formed.doubts == ()
    (plot,) = read_raw(tmp_path / "r.raw")
    other = replace(plot, title="Tide probe, older")
    assert "its title is" in impedances([other], partition.circuit, partition).doubts[0]
    renamed = tuple(replace(v, name="v(level)") if v.name == "v(n)" else v for v in plot.variables)
    (doubt,) = impedances([replace(plot, variables=renamed)], partition.circuit, partition).doubts
    assert "v(level), which the deck has not" in doubt
