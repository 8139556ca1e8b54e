"""The return ratio against ngspice on flat linear decks, from 1 Hz to 10 MHz.

ngspice is given the cut and the test signal as written here; each deck's figures are the definitions of an input
and of an output impedance, taken from its own voltages and currents.
"""

import subprocess
from pathlib import Path

import numpy as np
import pytest
from partitions_by_hand import PortAt, amplifier, partition

from xcheck.circuit.arrays import Complex
from xcheck.impedance.return_ratio import return_ratios
from xcheck.impedance.types import ReturnRatio

FREQUENCY = 10 ** np.linspace(0, 7, 71)
LARGEST = 1e-6

OPAMP = """
    rid p m 2e6
    cid p m 2e-12
    rcp p 0 1e9
    rcm m 0 1e9
    e1 y 0 p m 2e5
    rp y q 1e3
    cp q 0 3.2e-5
    e2 z 0 q 0 1
    ro z out 75
"""
INNER = ("rid", "cid", "rcp", "rcm", "rp", "cp", "e2", "ro")
PLUS, MINUS = ("rid", "cid", "rcp", "e1"), ("rid", "cid", "rcm", "e1")

STAGES = {
    "inverting": (
        "v1 in 0\nr1 in m 1e4\nrf m out 1e5\ncf m out 1e-11\nrg p 0 9.1e3\nrl out 0 2e3",
        [PortAt("in", "input", ("r1",)), PortAt("out", "output", ("ro", "rf", "cf"))],
    ),
    "non-inverting": (
        "v1 s 0\nrs s p 600\nrg m 0 1e3\nrf m out 9.1e4\ncl out 0 1e-10",
        [PortAt("p", "input", PLUS), PortAt("out", "output", ("ro", "rf"))],
    ),
    "transimpedance": (
        "i1 0 m\ncd m 0 1e-10\nrf m out 1e6\ncf m out 5e-13\nrp0 p 0 1\nrl out 0 1e4",
        [PortAt("m", "input", (*MINUS, "cd", "rf", "cf"), True), PortAt("out", "output", ("ro", "rf", "cf"))],
    ),
    "second-order low-pass": (
        "v1 in 0\nr1 in a 1e4\nr2 a p 1e4\nca a out 2.2e-8\ncb p 0 1e-8\nrx out m 10\nrl out 0 1e4",
        [PortAt("in", "input", ("r1",)), PortAt("out", "output", ("ro", "ca", "rx"))],
    ),
    "transformer in the loop": (
        "v1 in 0\nr1 in m 1e4\nla out 0 1e-3\nlb b 0 4e-3\nka la lb 0.98\nrf b m 1e5\nrg p 0 10",
        [PortAt("in", "input", ("r1",)), PortAt("out", "output", ("ro", "la"))],
    ),
    "current mirrored back": (
        "v1 in 0\nr1 in m 1e4\nrf m out 1e5\nvs out w 0\nrl w 0 1e3\nf9 m 0 vs 1e-3\nh9 g 0 vs 5\nrh g p 1e4",
        [PortAt("in", "input", ("r1",)), PortAt("out", "output", ("ro", "rf"))],
    ),
}


def measured(text: str, port: PortAt, folder: Path) -> Complex:
    """The port's impedance by ngspice, from a deck with the port cut."""
    lines = [line.split() for line in text.strip().splitlines()]
    for words in lines:
        if words[0] in port.inside:
            words[1:] = ["inside" if word == port.node else word for word in words[1:]]
    by_current = port.side == "output" or port.current_driven
    deck = ["a port cut open", *(_card(words) for words in lines)]
    deck.append(f"vcut inside {port.node} dc 0" + ("" if by_current else " ac 1"))
    deck += ["itest 0 inside ac 1"] if by_current else []
    deck += [".ac dec 10 1 10meg", ".save v(inside) i(vcut)", ".end"]
    (folder / "cut.cir").write_text("\n".join(deck) + "\n")
    subprocess.run(
        ["ngspice", "-b", "-n", "-r", "cut.raw", "cut.cir"], cwd=folder, check=True, capture_output=True, timeout=60
    )
    header, _, body = (folder / "cut.raw").read_bytes().partition(b"Binary:\n")
    names = [line.split()[1] for line in header.decode().splitlines() if line.startswith("\t")]
    table = np.frombuffer(body, dtype=np.complex128).reshape(-1, len(names))
    column = {name: table[:, n] for n, name in enumerate(names)}
    assert column["frequency"].real == pytest.approx(FREQUENCY, rel=1e-9)
    voltage, out_of_stage = column["v(inside)"], column["i(vcut)"]
    impedance: Complex = voltage / (1 - out_of_stage) if by_current else voltage / -out_of_stage
    return impedance


def _card(words: list[str]) -> str:
    if words[0][0] in "vi":
        return " ".join([*words[:3], "dc 0"])
    return " ".join(words)


@pytest.mark.engine
@pytest.mark.parametrize("name", STAGES)
def test_every_port_agrees_with_ngspice(name: str, tmp_path: Path) -> None:
    network, ports = STAGES[name]
    text = OPAMP + network
    plain = text.replace("vs out w 0", "vs out w")
    parted = partition(plain, {"u1": ([amplifier("e1", ("p", "m", "out"), inner=INNER)], ports)}, ["in", "s"])
    answers = return_ratios(parted, FREQUENCY)
    for port in ports:
        answer = answers[f"u1.{port.node}"]
        assert isinstance(answer, ReturnRatio), answer
        expected = measured(text, port, tmp_path)
        gap = np.abs(answer.impedance - expected) / np.abs(expected)
        assert gap.max() < LARGEST, f"{port.node}: {gap.max():.2e} at {FREQUENCY[gap.argmax()]:.4g} Hz"
