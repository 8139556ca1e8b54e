"""The README's first output is what the command prints, and the files it names are there."""

import re
from pathlib import Path

import pytest

import xcheck
from xcheck.options import Options
from xcheck.report import text
from xcheck.report.amplifiers import amplifiers

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


@pytest.mark.engine
def test_the_shown_review_is_the_real_one(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    shown = text.render(xcheck.review("netlists/lantern_light.cir"), width=100, symbols=True)
    block = "\n".join("    " + line if line else "" for line in shown.rstrip().splitlines())
    # the version of ngspice is the reader's own
    generic = re.sub(r"ngspice \d+", "ngspice N", block)
    assert generic in re.sub(r"ngspice \d+", "ngspice N", README)


@pytest.mark.engine
def test_the_shown_amplifier_is_the_real_one(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    options = Options(ports_measured=False)
    evidence = xcheck.review("tests/decks/nonlinear/railed_input.cir", options=options).decks[0].evidence
    assert evidence is not None
    shown = amplifiers(evidence).rstrip().splitlines()
    start = next(k for k, line in enumerate(shown) if line.startswith("amplifier xu3"))
    assert "\n".join("    " + line for line in shown[start:]) in README


def test_files_that_are_named_are_there() -> None:
    developers = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    for name in re.findall(r"`?((?:xcheck|ci|netlists|tests)/[\w./]*\w)", README + developers):
        assert (ROOT / name).exists(), name
