"""The project file: what it may say, how its faults are told, and what it changes in a review."""

from pathlib import Path

import pytest

from xcheck.errors import ProjectError
from xcheck.options import Options
from xcheck.project import find_project, read_project
from xcheck.reviewed import DeckReview
from xcheck.reviewing import review

DECK = """Level stage
.subckt gauge_model 3 2 7 4 6
rid 3 2 1meg
g1 0 a 3 2 1m
ra a 0 100meg
ca a 0 159p
e2 b 0 a 0 1
ro b 6 100
rq 7 4 10k
.ends
vp vp 0 12
vn vn 0 -12
vin in 0 0 ac 1
r1 in m 10k
r2 m out 47k
xu1 0 m vp vn out gauge_model
rl out 0 5k
.ac dec 10 10 100k
.end
"""


def write(folder: Path, toml: str) -> Path:
    path = folder / "xcheck.toml"
    path.write_text(toml)
    return path


def reviewed(folder: Path, toml: str, deck: str = DECK, **options: object) -> DeckReview:
    write(folder, toml)
    (folder / "stage.cir").write_text(deck)
    return review(folder / "stage.cir", options=Options(**{"engine": "none", **options})).decks[0]  # type: ignore[arg-type]


def test_all_that_a_file_may_say(tmp_path: Path) -> None:
    project = read_project(
        write(
            tmp_path,
            """band = "20:20k"
tolerance = "0.5%"
[parts.GAUGE7]
like = "tl072"
gain = "500k"
[parts.gauge8]
gain = 1e5
gain_bandwidth_hz = "2meg"
data_sheet = "gauge 8, in the project's folder"
[amplifiers.gauge_model]
pins = { "in+" = "3", "in-" = 2, out = "6" }
part = "GAUGE7"
output_resistance_ohm = 60
""",
        )
    )
    assert project.band == (20.0, 20e3)
    assert project.tolerance == pytest.approx(0.005)
    part = project.part_of("gauge_model")
    assert part is not None
    assert (part.name, part.values["gain"], part.values["slew_rate_v_per_s"]) == ("gauge7", 500e3, 13e6)
    other = project.part_of("GAUGE8")
    assert other is not None
    assert other.values["gain_bandwidth_hz"] == 2e6
    assert project.amplifiers["gauge_model"].values == {"output_resistance_ohm": 60.0}
    known = project.part_of("lm741")
    assert known is not None
    assert known.values["input_resistance_ohm"] == 2e6  # uA741 data sheet, from memory


@pytest.mark.parametrize(
    ("toml", "said"),
    [
        ("gian = 3", "gian: no such key; known keys: band"),
        ("[parts.a]\ngian = 3", "parts.a.gian: no such key; did you mean `gain`?"),
        ("[parts.a]\ngain = -3", "parts.a.gain: "),
        ('[parts.a]\ngain = "4k7"', "parts.a.gain: `4k7` is no number"),
        ('[parts.a]\nlike = "tl07"', "parts.a.like: no part `tl07` is known; did you mean"),
        ('[parts.a]\nkind = "tube"', "parts.a.kind: `tube` is none of voltage-feedback"),
        ('[amplifiers.a]\npins = { "in+" = "3" }', "amplifiers.a.pins: no in- and no out is told"),
        ('[amplifiers.a]\npins = { "in+" = "3", "in-" = "2", out = 0 }', "amplifiers.a.pins: out: a pin's name"),
        ('[amplifiers.a]\npins = { inp = "3" }', "amplifiers.a.pins: `inp` is none of in+"),
        ('band = "20"', "band: `20` is no band"),
        ('tolerance = "lots"', "tolerance: `lots` is no tolerance"),
        ("[parts", "cannot be read"),
    ],
)
def test_a_fault_names_its_key(tmp_path: Path, toml: str, said: str) -> None:
    path = write(tmp_path, toml)
    with pytest.raises(ProjectError) as fault:
        read_project(path)
    assert said in str(fault.value)
    assert str(path) in str(fault.value)
    assert fault.value.exit_status == 2


def test_every_fault_is_on_a_line_of_its_own(tmp_path: Path) -> None:
    with pytest.raises(ProjectError) as fault:
        read_project(write(tmp_path, "a = 1\nb = 2\n[parts.x]\nc = 3\n"))
    assert len(str(fault.value).splitlines()) == 3


def test_the_nearest_file_up_to_the_repository_holds(tmp_path: Path) -> None:
    inner = tmp_path / "board" / "front"
    inner.mkdir(parents=True)
    deck = inner / "a.cir"
    outermost, middle = write(tmp_path, ""), tmp_path / "board" / "xcheck.toml"
    assert find_project(deck) is None, "without a repository only the deck's own folder counts"
    (tmp_path / "board" / ".git").mkdir()
    assert find_project(deck) is None, "what lies above the repository does not count"
    middle.write_text("")
    assert find_project(deck) == middle
    beside = write(inner, "")
    assert find_project(deck) == beside
    assert outermost.exists()


def test_a_stated_value_counts_in_the_analytic_methods(tmp_path: Path) -> None:
    plain = reviewed(tmp_path, "")
    stated = reviewed(tmp_path, "[amplifiers.gauge_model]\noutput_resistance_ohm = 200\n")
    for deck, ohm, origin in ((plain, 100.0, "deck"), (stated, 200.0, "project")):
        assert deck.evidence is not None
        quantity = deck.evidence.partition.amplifiers[0].open_loop.values["output_resistance_ohm"]
        assert (quantity.value, quantity.origin) == (ohm, origin)
    ratio = abs(stated.port("xu1", "out").analytic[0]) / abs(plain.port("xu1", "out").analytic[0])  # type: ignore[index]
    assert ratio == pytest.approx(2.0, rel=0.05)


@pytest.mark.engine
def test_a_stated_value_is_held_against_the_simulated_deck(tmp_path: Path) -> None:
    apart = reviewed(tmp_path, "[amplifiers.gauge_model]\noutput_resistance_ohm = 200\n", engine="ngspice")
    assert apart.port("xu1", "out").verdict == "disagrees"
    same = reviewed(tmp_path, "[amplifiers.gauge_model]\noutput_resistance_ohm = 100\n", engine="ngspice")
    assert same.port("xu1", "out").verdict == "agrees"
    loose = reviewed(
        tmp_path, 'tolerance = "500%"\n[amplifiers.gauge_model]\noutput_resistance_ohm = 200\n', engine="ngspice"
    )
    assert loose.port("xu1", "out").verdict == "agrees"


def test_stated_pins_count_and_wrong_ones_are_said(tmp_path: Path) -> None:
    other = DECK.replace("xu1 0 m vp vn out", "xu1 m 0 vp vn out").replace("g1 0 a 3 2 1m", "b1 0 a i=1m*tanh(v(2,3))")
    deck = reviewed(tmp_path, '[amplifiers.gauge_model]\npins = { "in+" = "2", "in-" = "3", out = "6" }\n', other)
    assert deck.evidence is not None
    (amplifier,) = deck.evidence.partition.amplifiers
    assert (amplifier.non_inverting, amplifier.inverting) == ("0", "m")
    wrong = reviewed(tmp_path, '[amplifiers.gauge_model]\npins = { "in+" = "2", "in-" = "9", out = "6" }\n')
    (finding,) = [f for f in wrong.findings if f.rule == "syntax"]
    assert finding.place.file.endswith("xcheck.toml")
    assert "there is no pin `9` (it has 3 2 7 4 6)" in finding.message


def test_a_part_of_ones_own_gives_the_data_sheet_column(tmp_path: Path) -> None:
    toml = '[parts.gauge7]\nlike = "ua741"\noutput_resistance_ohm = 75\n[amplifiers.gauge_model]\npart = "gauge7"\n'
    deck = reviewed(tmp_path, toml)
    answer = deck.port("xu1", "out")
    assert answer.data_sheet is not None
    assert answer.analytic is not None
    assert abs(answer.data_sheet[0]) != pytest.approx(abs(answer.analytic[0]))
