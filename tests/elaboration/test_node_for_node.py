"""Every deck in `dialect/`, and some whose bytes matter, read as ngspice reads them: operating point and AC response of
every node, and the current of every source, within 1e-6.

A file in `dialect/` holds several decks, each behind `=== TITLE`, with the files it includes behind `--- NAME`.
"""

import re
from pathlib import Path

import pytest
from node_for_node import differences, prepared, run

DIALECT = Path(__file__).parent / "dialect"


def decks() -> list[tuple[str, str]]:
    """Title and text of each deck."""
    texts = {path.stem: path.read_text() for path in sorted(DIALECT.glob("*.txt"))}
    parts = [(stem, p) for stem, text in texts.items() for p in re.split(r"^=== ", text, flags=re.MULTILINE)[1:]]
    return [(f"{stem}: {part.splitlines()[0]}", part) for stem, part in parts]


ALL = decks()


@pytest.mark.engine
@pytest.mark.parametrize("text", [text for _, text in ALL], ids=[name for name, _ in ALL])
def test_a_deck_reads_as_in_ngspice(text: str, tmp_path: Path) -> None:
    deck, *files = re.split(r"^--- ", text, flags=re.MULTILINE)
    (tmp_path / "deck.cir").write_text(deck)
    for file in files:
        name, _, content = file.partition("\n")
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_text(content)
    compare(tmp_path)


def compare(folder: Path) -> None:
    """The folder's deck is read without an error, and as ngspice reads it."""
    case = prepared(folder)
    findings = (*case.circuit.deck.findings, *case.circuit.findings)
    assert not [f"{f.place} {f.rule}: {f.message}" for f in findings if f.level == "error"]
    assert case.circuit.nodes, "nothing was read"
    run([case])
    assert not differences(case)


@pytest.mark.engine
def test_a_difference_is_seen(tmp_path: Path) -> None:
    (tmp_path / "deck.cir").write_text("divider\nv1 a 0 1 ac 1\nr1 a b 1k\nr2 b 0 1k\nc1 b 0 1n\n.end\n")
    case = prepared(tmp_path)
    flat = (tmp_path / "flat.cir").read_text()
    for changed, kind in (
        (flat.replace("r2 b 0 1000.0", "r2 b 0 1000.01"), "op"),
        (flat.replace("1e-09", "2e-09"), "ac"),
    ):
        assert changed != flat
        (tmp_path / "flat.cir").write_text(changed)
        run([case])
        assert any(line.startswith(f"{kind}: b is") for line in differences(case))
