"""The catalogue against published values, and names that must and must not be found."""

import pytest

from xcheck.parts.catalogue import catalogue, find

LIMITS = {
    "gain": (1e3, 1e8), "gain_bandwidth_hz": (1e4, 1e10), "input_resistance_ohm": (1e3, 1e15),
    "input_capacitance_f": (1e-13, 1e-10), "common_mode_resistance_ohm": (1e6, 1e15),
    "common_mode_capacitance_f": (1e-13, 1e-10), "output_resistance_ohm": (1, 1e4), "slew_rate_v_per_s": (1e3, 1e10),
    "bias_current_a": (1e-15, 1e-4), "offset_current_a": (1e-15, 1e-5),
    "output_current_a": (1e-3, 1.0), "supply_min_v": (0.5, 12),
    "supply_max_v": (3, 100), "common_mode_below_positive_v": (-1, 5), "common_mode_above_negative_v": (-1, 5),
}  # fmt: skip


def test_every_value_is_sane_and_every_kind_is_there() -> None:
    assert len(catalogue()) >= 48
    assert {part.kind for part, _ in catalogue().values()} == {
        "voltage-feedback", "current-feedback", "transconductance", "comparator"
    }  # fmt: skip
    for part, _ in catalogue().values():
        assert part.values, part.name
        for key, value in part.values.items():
            low, high = LIMITS[key]
            assert low <= value <= high, (part.name, key)


def test_published_values() -> None:
    """uA741 data sheet: 2 MOhm, 75 Ohm, 200 V/mV, about 1 MHz, 0.5 V/us; TL072 data sheet: 3 MHz, 13 V/us, 1 TOhm;
    OP07 data sheet: 60 Ohm, 0.6 MHz. All from memory."""
    expected = {
        "ua741": {"input_resistance_ohm": 2e6, "output_resistance_ohm": 75, "gain": 2e5, "gain_bandwidth_hz": 1e6,
                  "slew_rate_v_per_s": 5e5},
        "tl072": {"gain_bandwidth_hz": 3e6, "slew_rate_v_per_s": 13e6, "input_resistance_ohm": 1e12},
        "op07": {"output_resistance_ohm": 60, "gain_bandwidth_hz": 6e5},
    }  # fmt: skip
    for name, values in expected.items():
        part = find(name)
        assert part is not None
        assert values.items() <= part.values.items()


@pytest.mark.parametrize(
    ("written", "name"),
    [("LM741CN/NS", "lm741"), ("uA741_x", "ua741"), ("\N{MICRO SIGN}A741", "ua741"), ("TL072ACP", "tl072"),
     ("opa2134pa", "opa2134"), ("lm358_5", "lm358"), ("x_tl081", "tl081"), ("LT1028CS8", "lt1028")],
)  # fmt: skip
def test_names_that_decks_use(written: str, name: str) -> None:
    part = find(written)
    assert part is not None
    assert part.name == name


@pytest.mark.parametrize(
    "written", ["", "opamp", "opa", "amp741b2", "741", "op275", "tl072h", "tl072hidr", "lm358b", "mytl072", "lm3581"]
)
def test_what_is_no_such_part(written: str) -> None:
    assert find(written) is None


def test_pinouts() -> None:
    """The usual single and dual packages (common practice)."""
    single, dual, transconductance = find("ua741"), find("tl072"), find("lm13700")
    assert single is not None
    assert dual is not None
    assert transconductance is not None
    assert single.pinout == {"2": "in-", "3": "in+", "4": "v-", "6": "out", "7": "v+"}
    assert (dual.pinout["8"], dual.pinout["4"], dual.pinout["7"]) == ("v+", "v-", "out2")
    assert transconductance.pinout == {}
    five_pins = find("mcp6001")
    assert five_pins is not None
    assert five_pins.pinout == {}
