"""Two decks in ngspice, held against each other: one as it was written, one as it was read here and written out flat.

A case is a folder with `deck.cir` in it. ngspice reads `deck.cir` and then `flat.cir`; each time every node's operating
point and its AC response at a few frequencies are kept. What is compared is named by what this program calls a node.
"""

import cmath
import subprocess
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from xcheck.circuit.elements import GROUND, Circuit, Source
from xcheck.deck.reader import read_deck
from xcheck.elaboration import elaborate
from xcheck.elaboration.flat import FlatDeck, flat_deck
from xcheck.simulate.names import circuit_name

FREQUENCIES = "dec 1 10 1meg"
TOLERANCE = 1e-6
FLOOR = 1e-12
"""Volt or ampere; ngspice's own rounding on a node at zero."""
INSIDE = ("_int1", "_int2", "_int3")
"""Ends of nodes that ngspice makes for itself when it rewrites a TABLE or POLY source."""

Values = dict[str, list[complex]]


@dataclass
class Case:
    """A deck that both have read. said: what ngspice printed."""

    circuit: Circuit
    flat: FlatDeck
    folder: Path
    said: str = ""


def prepared(folder: Path) -> Case:
    """Reads the folder's deck and writes its flat one beside it."""
    circuit = elaborate(read_deck(folder / "deck.cir"))
    flat = flat_deck(circuit)
    (folder / "flat.cir").write_text(flat.text)
    return Case(circuit, flat, folder)


def run(cases: Sequence[Case]) -> None:
    """Runs all cases in one ngspice, each in its own folder."""
    lines = ["driver", ".control", "set filetype=ascii"]
    for case in cases:
        lines.append(f"cd {case.folder}")
        for name in ("deck", "flat"):
            lines += [f"source {name}.cir", "op", f"write {name}.op", f"ac {FREQUENCIES}", f"write {name}.ac"]
            lines += ["remcirc", "destroy all"]
    driver = cases[0].folder / "driver.cir"
    driver.write_text("\n".join([*lines, ".endc", ".end", ""]))
    done = subprocess.run(
        ["ngspice", "-b", str(driver)], cwd=driver.parent, stdin=subprocess.DEVNULL, capture_output=True,
        timeout=20, check=False,
    )  # fmt: skip
    for case in cases:
        case.said = (done.stdout + done.stderr).decode("utf-8", "replace")


def vectors(path: Path) -> Values:
    """The vectors of an ASCII raw file: `v(a)` as `a`, `i(v1)` as `v1#branch`; {} where no analysis was run."""
    text = path.read_bytes().decode("latin-1")
    head, _, body = text.partition("Values:\n")
    if "Plotname: constants" in head:
        return {}
    lines = head.splitlines()
    count = int(next(x for x in lines if x.startswith("No. Variables")).split(":")[1])
    start = next(k for k, x in enumerate(lines) if x.startswith("Variables:")) + 1
    names = [line.split("\t")[2] for line in lines[start : start + count]]
    values: list[list[complex]] = [[] for _ in names]
    words = [word for word in body.split() if word]
    complexes = "Flags: complex" in head
    for point in range(len(words) // (count + 1)):
        for index in range(count):
            word = words[point * (count + 1) + 1 + index]
            real, _, imaginary = word.partition(",")
            values[index].append(complex(float(real), float(imaginary) if complexes else 0.0))
    return {_bare(name): column for name, column in zip(names, values, strict=True)}


def _bare(name: str) -> str:
    inside = name[2:-1] if name[:2].lower() in ("v(", "i(") and name.endswith(")") else name
    return inside + "#branch" * (name[:2] == "i(")


def differences(case: Case) -> list[str]:
    """What differs between the deck as written and the deck as read; empty where nothing does."""
    found: list[str] = []
    for kind in ("op", "ac"):
        paths = [case.folder / f"{name}.{kind}" for name in ("deck", "flat")]
        written, flat = (vectors(path) if path.exists() else {} for path in paths)
        missing = [p.name for p, found in zip(paths, (written, flat), strict=True) if not found]
        if missing:
            return [f"ngspice made no {' and no '.join(missing)}: {case.said[-1500:]}"]
        found += [f"{kind}: {line}" for line in _compared(case, written, flat)]
    return found


def _compared(case: Case, written: Values, flat: Values) -> list[str]:
    found: list[str] = []
    nodes = [node for node in case.circuit.nodes if node != GROUND]
    for node in nodes:
        if node not in written:
            found.append(f"`{node}` is no node in ngspice: {sorted(written)}")
        elif case.flat.nodes[node] not in flat:
            found.append(f"`{node}` is not in the flat deck")
        else:
            found += _apart(node, written[node], flat[case.flat.nodes[node]])
    known = {*nodes, "frequency"}
    found += [
        f"`{name}` is in ngspice alone"
        for name in written
        if "#" not in name and name not in known and not name.endswith(INSIDE)
    ]
    for vector, values in written.items():
        device, _, rest = vector.partition("#")
        source = case.circuit.by_name.get(circuit_name(device))
        if rest == "branch" and isinstance(source, Source):
            found += _apart(vector, values, flat[case.flat.names[source.name] + "#branch"])
    return found


def _apart(name: str, written: list[complex], flat: list[complex]) -> list[str]:
    pairs = list(zip(written, flat, strict=True))
    if all(cmath.isclose(a, b, rel_tol=TOLERANCE, abs_tol=FLOOR) for a, b in pairs):
        return []
    a, b = max(pairs, key=lambda pair: abs(pair[0] - pair[1]))
    return [f"{name} is {a:.9g} as written and {b:.9g} as read"]
