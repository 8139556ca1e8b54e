"""Closed forms against an exact symbolic solution of the nodal equations, and against published values."""

import cmath

import mpmath
import numpy as np
import pytest
import sympy
from formula_reader import value_of
from hypothesis import given, settings
from hypothesis import strategies as st

from xcheck.circuit.arrays import Complex
from xcheck.stages.types import AmplifierResponse
from xcheck.topologies import TOPOLOGIES, forms
from xcheck.topologies.expression import Expression, quantity
from xcheck.topologies.forms import Places, core_of

NAMES = "y1 ys yg yp yx yf yl yd yip yin ap an zo".split()


def solved() -> dict[str, sympy.Expr]:
    """The driving-point impedances of the one-amplifier circuit, every element a symbol: exact nodal solution by
    Cramer's rule, for nodes n, p, o with one volt in front of y1 (or one ampere at the output)."""
    y1, ys, yg, yp, yx, yf, yl, yd, yip, yin, ap, an, zo = sympy.symbols(NAMES)
    pair = yd + yx
    found = {}
    for side in ("n", "p", "output"):
        matrix = sympy.Matrix([
            [yg + yin + pair + yf + (y1 if side == "n" else 0), -pair, -yf],
            [-pair, yp + yip + pair + (y1 if side == "p" else 0), 0],
            [-yf - an / zo, -ap / zo, yf + yl + 1 / zo],
        ])  # fmt: skip
        driven = {"n": 0, "p": 1, "output": 2}[side]
        right = sympy.zeros(3, 1)
        right[driven] = 1 if side == "output" else y1
        replaced = matrix.copy()
        replaced[:, driven] = right
        voltage = replaced.det() / matrix.det()
        found[side] = voltage if side == "output" else 1 / (ys + y1 * (1 - voltage))
    return found


EXACT = {side: sympy.lambdify(sympy.symbols(NAMES), e, "mpmath") for side, e in solved().items()}
FORMS = (("n", forms.inverting_input), ("n", forms.virtual_ground), ("p", forms.non_inverting_input),
         ("output", forms.output))  # fmt: skip
SIZE = st.floats(min_value=-9, max_value=-1).map(lambda e: 10.0**e)
PHASE = st.floats(min_value=-1.5, max_value=1.5)
ADMITTANCE = st.tuples(SIZE, PHASE).map(lambda t: cmath.rect(*t))


def row(value: complex) -> Complex:
    return np.array([value], dtype=np.complex128)


def places(a: AmplifierResponse, **ohms: complex) -> Places:
    """Places by name, in ohm; what is not named is not there, and the non-inverting input is ground unless `bias` or
    `open_p` says otherwise."""
    grounded = "bias" not in ohms and not ohms.pop("open_p", 0)
    at: dict[str, Expression | None] = {
        name: quantity(symbol, row(ohms[name]), 0) if name in ohms else None
        for name, symbol in {
            "own": "Z1", "shunt": "Zs", "leg": "Zg", "bias": "Zp", "feedback": "Zf", "across": "Zx", "load": "ZL",
        }.items()
    }  # fmt: skip
    return Places(core=core_of(a, 0), bias_grounded=grounded, **at)


def amplifier(
    gain: complex, zo: complex = 0, yd: complex = 0, yc: complex = 0, common: complex = 1
) -> AmplifierResponse:
    """common: gain from the non-inverting input over that from the inverting one."""
    return AmplifierResponse(row(gain * common), row(-gain), row(yd), row(yc), row(yc), row(zo))


@settings(max_examples=60, deadline=None)
@given(
    ys=st.lists(ADMITTANCE, min_size=10, max_size=10),
    gain=st.tuples(st.floats(min_value=0, max_value=7), PHASE),
    common=st.one_of(st.just(1.0), st.floats(min_value=0.9, max_value=1.1)),
    zo=st.floats(min_value=0.1, max_value=1e3),
)
def test_each_form_is_the_exact_nodal_solution(
    ys: list[complex], gain: tuple[float, float], common: float, zo: float
) -> None:
    a = cmath.rect(10 ** gain[0], gain[1])
    values = dict(zip(NAMES, [*ys, a * common, -a, complex(zo)], strict=True))
    response = AmplifierResponse(*(row(values[k]) for k in ("ap", "an", "yd", "yip", "yin", "zo")))
    keys = {"own": "y1", "shunt": "ys", "leg": "yg", "bias": "yp", "feedback": "yf", "across": "yx", "load": "yl"}
    around = places(response, **{name: 1 / values[key] for name, key in keys.items()})
    for side, form in FORMS:
        with mpmath.workdps(50):
            exact = complex(EXACT[side](*(mpmath.mpmathify(values[name]) for name in NAMES)))
        found = form(around)
        assert found is not None
        # differences of gains up to 1e7, and of admittances over eight decades, leave nine digits
        assert complex(found.value[0]) == pytest.approx(exact, rel=1e-7), (side, found.text)


@settings(max_examples=60, deadline=None)
@given(
    ohms=st.dictionaries(
        st.sampled_from(["own", "shunt", "leg", "bias", "feedback", "across", "load", "open_p"]),
        ADMITTANCE.map(lambda y: 1 / y),
    ),
    parts=st.tuples(st.booleans(), st.booleans(), st.booleans(), st.booleans()),
)
def test_places_that_are_absent_leave_the_formula_and_not_the_value(
    ohms: dict[str, complex], parts: tuple[bool, bool, bool, bool]
) -> None:
    """A place that is not there is the limit of one that is nearly not there, and the printed text is the value."""
    has_zo, has_zid, has_zic, alike = parts
    ohms = {"feedback": 1e4 + 0j, **ohms}
    a = amplifier(1e4 - 2e3j, 50.0 * has_zo, 1e-6 * has_zid, (1e-9 + 1e-10j) * has_zic, 1.0 if alike else 1.001)
    around = places(a, **ohms)
    far, near = 1e-26, 1e26
    values = {
        "y1": 1 / ohms["own"] if "own" in ohms else near,
        "ys": 1 / ohms.get("shunt", near), "yg": 1 / ohms.get("leg", near),
        "yp": near if around.bias_grounded else 1 / ohms.get("bias", near),
        "yx": 1 / ohms.get("across", near), "yf": 1 / ohms["feedback"], "yl": 1 / ohms.get("load", near),
        "yd": a.y_differential[0], "yip": a.y_plus[0], "yin": a.y_minus[0],
        "ap": a.gain_plus[0], "an": a.gain_minus[0], "zo": a.z_output[0] or far,
    }  # fmt: skip
    if around.bias_grounded:
        around = Places(**{f: getattr(around, f) for f in Places.__dataclass_fields__ if f != "across"},
                        across=None)  # fmt: skip
        values["yx"] = 1 / near
    floating = not around.bias_grounded and not ({"bias", "across"} & set(ohms) or has_zid or has_zic)
    for side, form in FORMS:
        if around.bias_grounded if side == "p" else floating:
            continue
        found = form(around)
        with mpmath.workdps(120):
            exact = complex(EXACT[side](*(mpmath.mpmathify(complex(values[name])) for name in NAMES)))
        if found is None:
            assert abs(exact) > 1e20 if side == "p" else abs(exact) < 1e-20
            continue
        assert complex(found.value[0]) == pytest.approx(exact, rel=1e-7), (side, found.text)
        known = {"A": values["an"] * -1, "A-": values["an"] * -1, "A+": values["ap"], "Zo": values["zo"],
                 "Z1": ohms.get("own", 0), "Zs": ohms.get("shunt", 0), "Zg": ohms.get("leg", 0),
                 "Zp": ohms.get("bias", 0), "Zf": ohms["feedback"], "Zx": ohms.get("across", 0),
                 "ZL": ohms.get("load", 0),
                 **{name: 1 / y for name, y in (("Zid", values["yd"]), ("Zic", values["yin"])) if y}}  # fmt: skip
        assert value_of(found.text, known, dict(found.legend)) == pytest.approx(complex(found.value[0]), rel=1e-9)


@pytest.mark.parametrize(
    ("form", "ohms", "text"),
    [
        (forms.inverting_input, {"own": 1e4, "feedback": 1e5}, "Z1 + 1/(1/Zid + (1 + A)/(Zf + Zo))"),
        (
            forms.inverting_input,
            {"own": 1e4, "feedback": 1e5, "bias": 9e3, "leg": 1e3, "load": 2e3},
            "Z1 + 1/(1/Zg + 1/(Zid + Zp) + (1 + k A')/(Zf + Zo'))",
        ),
        (forms.virtual_ground, {"feedback": 1e6, "leg": 1e7}, "(Zf + Zo)/(1 + A) || Zg || Zid"),
        (forms.non_inverting_input, {"open_p": 1}, "Zid (1 + A) + Zo"),
        (forms.non_inverting_input, {"open_p": 1, "leg": 1e3, "feedback": 9e3}, "Zid (1 + A b) + (Zg || (Zf + Zo))"),
        (forms.output, {}, "Zo/(1 + A) || Zid"),
        (forms.output, {"leg": 1e3, "feedback": 9e3}, "Zo/(1 + A b) || (Zf + Zn)"),
    ],
)
def test_the_text_is_what_an_engineer_writes(form: forms.Form, ohms: dict[str, complex], text: str) -> None:
    found = form(places(amplifier(1e5, zo=75, yd=5e-7), **ohms))
    assert found is not None
    assert found.text == text


def test_the_published_finite_gain_inverting_stage() -> None:
    """Sedra and Smith, Microelectronic Circuits: Rin = R1 + Rf/(1 + A) for an otherwise ideal op-amp (from memory)."""
    for gain in (10.0, 1e3, 1e5):
        found = forms.inverting_input(places(amplifier(gain), own=10e3, feedback=100e3))
        assert found.value[0] == pytest.approx(10e3 + 100e3 / (1 + gain), rel=1e-12)


def test_the_inverting_stage_without_load_and_bias_resistor() -> None:
    """The pattern of all of them: Z1 + 1/(1/Rid + (1 + A)/(Rf + Ro)), by hand."""
    found = forms.inverting_input(places(amplifier(2e5, zo=75, yd=1 / 2e6), own=10e3, feedback=1e6))
    assert found.value[0] == pytest.approx(10e3 + 1 / (1 / 2e6 + (1 + 2e5) / (1e6 + 75)), rel=1e-12)


def test_common_practice_of_the_added_tenth_of_an_ohm() -> None:
    """Common practice: A = 100 000, Rf = 10 kOhm and Ro = 10 Ohm put about 0.1 Ohm in series with R1."""
    found = forms.inverting_input(places(amplifier(1e5, zo=10, yd=1 / 2e6), own=1e3, feedback=10e3))
    assert abs(found.value[0] - 1e3) == pytest.approx(0.1, rel=0.01)


@pytest.mark.parametrize("rid", [1e3, 2e3])
def test_common_practice_that_a_low_rid_sets_the_limit(rid: float) -> None:
    """Common practice: where Rf is large against A Rid, the amplifier's own Rid is what the input sees behind R1."""
    found = forms.inverting_input(places(amplifier(10.0, yd=1 / rid), own=100.0, feedback=10e6))
    assert abs(found.value[0] - 100.0) == pytest.approx(rid, rel=0.01)


def test_the_published_follower() -> None:
    """Sedra and Smith (from memory): Zin = Rid (1 + A) and Zout = Ro/(1 + A), but for what Rid itself carries."""
    a = amplifier(1e4, zo=75, yd=1 / 2e6)
    zin = forms.non_inverting_input(places(a, open_p=1))
    zout = forms.output(places(a))
    assert zin is not None
    assert zout is not None
    assert zin.value[0] == pytest.approx(2e6 * (1 + 1e4), rel=1e-4)
    assert zout.value[0] == pytest.approx(75.0 / (1 + 1e4), rel=1e-4)


def test_the_published_series_shunt_amplifier() -> None:
    """Gray, Hurst, Lewis and Meyer (from memory): a loop gain T raises the input impedance and lowers the output's
    by 1 + T; here T = A b with b = Rg/(Rg + Rf), and Rid so high that it loads nothing."""
    a = amplifier(1e4, zo=75, yd=1e-12)
    zin = forms.non_inverting_input(places(a, open_p=1, leg=1e3, feedback=9e3))
    zout = forms.output(places(a, leg=1e3, feedback=9e3))
    loop = 1e4 * 1e3 / (1e3 + 9e3 + 75)
    assert zin is not None
    assert zout is not None
    assert zin.value[0] == pytest.approx(1e12 * (1 + loop), rel=1e-6)
    # behind the output hangs the feedback network, 10 kOhm, in parallel
    assert zout.value[0] == pytest.approx(1 / ((1 + 1e4 * 0.1) / 75 + 1 / 10e3), rel=1e-6)


def test_every_topology_has_a_name_a_source_and_a_rule() -> None:
    names = [t.name for t in TOPOLOGIES]
    assert len(set(names)) == len(names) == 13
    assert all(t.source and t.input_rule and t.output_rule for t in TOPOLOGIES)
