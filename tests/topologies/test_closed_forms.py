"""Closed forms against an exact symbolic solution of the nodal equations, and against published values."""

from collections.abc import Mapping

import mpmath
import numpy as np
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from xcheck.stages.types import AmplifierResponse
from xcheck.topologies import TOPOLOGIES, forms
from xcheck.topologies.forms import Places

NAMES = "y1 y_port yg yp y_across yf y_out y_load yd yip yin ap an zo"


def solved() -> dict[str, sympy.Expr]:
    """The three driving-point impedances of the one-amplifier circuit, every element a symbol: exact nodal solution
    by Cramer's rule, for nodes n, p, o with one volt (or one ampere at the output) at the port."""
    y1, y_port, yg, yp, yx, yf, y_out, y_load, yd, yip, yin, ap, an, zo = sympy.symbols(NAMES)
    pair = yd + yx
    found = {}
    for side in ("n", "p", "output"):
        matrix = sympy.Matrix([
            [yg + yin + pair + yf + (y1 if side == "n" else 0), -pair, -yf],
            [-pair, yp + yip + pair + (y1 if side == "p" else 0), 0],
            [-yf - an / zo, -ap / zo, yf + y_out + 1 / zo + (0 if side == "output" else y_load)],
        ])  # fmt: skip
        driven = {"n": 0, "p": 1, "output": 2}[side]
        right = sympy.zeros(3, 1)
        right[driven] = 1 if side == "output" else y1
        replaced = matrix.copy()
        replaced[:, driven] = right
        voltage = replaced.det() / matrix.det()
        found[side] = voltage if side == "output" else 1 / (y_port + y1 * (1 - voltage))
    return found


EXACT = {side: sympy.lambdify(sympy.symbols(NAMES), e, "mpmath") for side, e in solved().items()}
FORMS = {"n": forms.inverting_input, "p": forms.non_inverting_input, "output": forms.output}
SIZE = st.floats(min_value=-9, max_value=-1).map(lambda e: 10.0**e)
PHASE = st.floats(min_value=-1.5, max_value=1.5)
ADMITTANCE = st.tuples(SIZE, PHASE).map(lambda t: complex(t[0] * np.exp(1j * t[1])))


@settings(max_examples=60, deadline=None)
@given(
    ys=st.lists(ADMITTANCE, min_size=11, max_size=11),
    gain=st.tuples(st.floats(min_value=0, max_value=7), PHASE),
    common=st.floats(min_value=0.9, max_value=1.1),
    zo=st.floats(min_value=0.1, max_value=1e3),
)
def test_each_form_is_the_exact_nodal_solution(
    ys: list[complex], gain: tuple[float, float], common: float, zo: float
) -> None:
    a = complex(10 ** gain[0] * np.exp(1j * gain[1]))
    values: Mapping[str, complex] = dict(zip(NAMES.split(), [*ys, a * common, -a, complex(zo)], strict=True))
    one = {k: np.array([v], dtype=np.complex128) for k, v in values.items()}
    amplifier = AmplifierResponse(one["ap"], one["an"], one["yd"], one["yip"], one["yin"], one["zo"])
    places = Places(*(one[k] for k in ("y1", "y_port", "yg", "yp", "y_across", "yf", "y_out", "y_load")))
    for side, form in FORMS.items():
        with mpmath.workdps(50):
            exact = complex(EXACT[side](*(mpmath.mpmathify(values[name]) for name in NAMES.split())))
        # differences of products of gains up to 1e7 with admittances over eight decades leave nine digits
        assert complex(form(amplifier, places)[0]) == pytest.approx(exact, rel=1e-7), side


def ideal_parts(**given: float) -> tuple[AmplifierResponse, Places]:
    """Resistances in ohm by name; what is not named is not there."""

    def y(name: str, absent: float) -> np.ndarray:
        value = given.get(name)
        return np.array([absent if value is None else (np.inf if value == 0 else 1.0 / value)], dtype=np.complex128)

    gain = np.array([given["gain"]], dtype=np.complex128)
    amplifier = AmplifierResponse(
        gain, -gain, y("rid", 0), y("ricp", 0), y("ricn", 0), np.array([given.get("ro", 0.0)], dtype=np.complex128)
    )
    places = Places(
        y("r1", np.inf),
        y("none", 0),
        y("rg", 0),
        y("rp", np.inf),
        y("none", 0),
        y("rf", np.inf),
        y("none", 0),
        y("rl", 0),
    )
    return amplifier, places


def test_the_published_finite_gain_inverting_stage() -> None:
    """Sedra and Smith, Microelectronic Circuits: Rin = R1 + Rf/(1 + A) for an otherwise ideal op-amp (from memory)."""
    for gain in (10.0, 1e3, 1e5):
        amplifier, places = ideal_parts(gain=gain, r1=10e3, rf=100e3)
        assert forms.inverting_input(amplifier, places)[0] == pytest.approx(10e3 + 100e3 / (1 + gain), rel=1e-12)


def test_common_practice_of_the_added_tenth_of_an_ohm() -> None:
    """Common practice: A = 100 000, Rf = 10 kOhm and Ro = 10 Ohm put about 0.1 Ohm in series with R1."""
    amplifier, places = ideal_parts(gain=1e5, r1=1e3, rf=10e3, ro=10.0, rid=2e6)
    assert abs(forms.inverting_input(amplifier, places)[0] - 1e3) == pytest.approx(0.1, rel=0.01)


@pytest.mark.parametrize("rid", [1e3, 2e3])
def test_common_practice_that_a_low_rid_sets_the_limit(rid: float) -> None:
    """Common practice: where Rf is large against A Rid, the amplifier's own Rid is what the input sees behind R1."""
    amplifier, places = ideal_parts(gain=10.0, r1=100.0, rf=10e6, rid=rid)
    assert abs(forms.inverting_input(amplifier, places)[0] - 100.0) == pytest.approx(rid, rel=0.01)


def test_the_published_follower() -> None:
    """Sedra and Smith (from memory): Zin = Rid (1 + A) beside the common-mode resistance, Zout = Ro/(1 + A)."""
    amplifier, places = ideal_parts(gain=1e4, rid=2e6, ro=75.0, rf=0.0, r1=0.0)
    places = Places(places.y1, places.y_port, places.yg, np.zeros(1, complex), *(
        getattr(places, name) for name in ("y_across", "yf", "y_out", "y_load")
    ))  # fmt: skip
    # Ro carries the input's own current, one part in Rid/Ro of the result
    assert abs(forms.non_inverting_input(amplifier, places)[0]) == pytest.approx(2e6 * (1 + 1e4), rel=1e-4)
    driven = Places(places.y1, places.y_port, places.yg, np.full(1, np.inf, complex), places.y_across, places.yf,
                    places.y_out, places.y_load)  # fmt: skip
    assert abs(forms.output(amplifier, driven)[0]) == pytest.approx(75.0 / (1 + 1e4), rel=1e-4)


def test_every_topology_has_a_name_a_source_and_a_rule() -> None:
    names = [t.name for t in TOPOLOGIES]
    assert len(set(names)) == len(names) == 12
    assert all(t.source and t.input_rule and t.output_rule for t in TOPOLOGIES)
