"""The tables of a project file as models that check themselves; loaded only where there is a file."""

from collections.abc import Iterator, Mapping
from difflib import get_close_matches
from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, ValidationError

from xcheck.project.words import KINDS, ROLES, number_of

Positive = Annotated[float, BeforeValidator(number_of), Field(gt=0)]
Number = Annotated[float, BeforeValidator(number_of)]


def _band(value: Any) -> tuple[float, float]:
    low, colon, high = str(value).partition(":")
    if not colon:
        raise ValueError(f'`{value}` is no band; write it as LOW:HIGH, for example "20:20k"')
    ends = number_of(low), number_of(high)
    if not 0 < ends[0] < ends[1]:
        raise ValueError(f"`{value}`: the lower end must be above zero and below the upper one")
    return ends


def _tolerance(value: Any) -> float:
    text = str(value).strip()
    try:
        found = float(text.removesuffix("%")) / (100 if text.endswith("%") else 1)
    except ValueError:
        found = -1.0
    if not 0 < found < 10:
        raise ValueError(f'`{value}` is no tolerance; write it as "1%" or 0.01')
    return found


def _kind(value: Any) -> str:
    if value not in KINDS:
        raise ValueError(f"`{value}` is none of {', '.join(KINDS)}")
    return str(value)


def _pins(value: Any) -> dict[str, str | int]:
    if not isinstance(value, dict):
        raise ValueError('a table is wanted, such as { "in+" = "3", "in-" = "2", out = "6" }')
    strange = [key for key in value if key not in ROLES]
    if strange:
        raise ValueError(f"`{strange[0]}` is none of {', '.join(ROLES)}")
    missing = [role for role in ROLES[:3] if role not in value]
    if missing:
        raise ValueError(f"no {' and no '.join(missing)} is told")
    for role, pin in value.items():
        if isinstance(pin, bool) or not isinstance(pin, (str, int)) or (isinstance(pin, int) and pin < 1):
            raise ValueError(f"{role}: a pin's name, or its place counted from 1, is wanted")
    return {role: pin.lower() if isinstance(pin, str) else pin for role, pin in value.items()}


class _Values(BaseModel):
    model_config = ConfigDict(extra="forbid")

    gain: Positive | None = None
    gain_bandwidth_hz: Positive | None = None
    second_pole_hz: Positive | None = None
    phase_margin_deg: Positive | None = None
    input_resistance_ohm: Positive | None = None
    input_capacitance_f: Positive | None = None
    common_mode_resistance_ohm: Positive | None = None
    common_mode_capacitance_f: Positive | None = None
    output_resistance_ohm: Positive | None = None
    slew_rate_v_per_s: Positive | None = None
    output_current_a: Positive | None = None
    bias_current_a: Number | None = None
    offset_current_a: Number | None = None
    supply_min_v: Positive | None = None
    supply_max_v: Positive | None = None
    common_mode_below_positive_v: Number | None = None
    common_mode_above_negative_v: Number | None = None

    def values(self) -> dict[str, float]:
        """The values that are given."""
        return {name: v for name in _Values.model_fields if (v := getattr(self, name)) is not None}


class PartTable(_Values):
    """`[parts.NAME]`"""

    like: str = ""
    data_sheet: str = ""
    kind: Annotated[str, BeforeValidator(_kind)] = ""
    sections: Annotated[int, Field(ge=0, le=4)] = 0


class AmplifierTable(_Values):
    """`[amplifiers.SUBCKT]`"""

    pins: Annotated[dict[str, str | int], BeforeValidator(_pins)] = Field(default_factory=dict)
    part: str = ""


class Tables(BaseModel):
    """The whole file."""

    model_config = ConfigDict(extra="forbid")

    band: Annotated[tuple[float, float] | None, BeforeValidator(_band)] = None
    tolerance: Annotated[float | None, BeforeValidator(_tolerance)] = None
    parts: dict[str, PartTable] = Field(default_factory=dict)
    amplifiers: dict[str, AmplifierTable] = Field(default_factory=dict)


def tables_of(table: Mapping[str, Any]) -> Tables | None:
    """The tables, None where something is wrong with them."""
    try:
        return Tables.model_validate(table)
    except ValidationError:
        return None


def faults_of(table: Mapping[str, Any]) -> Iterator[str]:
    """What is wrong with a file, each with its key."""
    try:
        Tables.model_validate(table)
    except ValidationError as error:
        for fault in error.errors():
            yield _fault([str(word) for word in fault["loc"]], fault["type"], fault["msg"])


def _fault(path: list[str], kind: str, words: str) -> str:
    key = ".".join(path)
    if kind != "extra_forbidden":
        return f"{key}: {words.removeprefix('Value error, ')}"
    tables: dict[str, type[BaseModel]] = {"parts": PartTable, "amplifiers": AmplifierTable}
    known = tables.get(path[0], Tables) if len(path) > 1 else Tables
    near = get_close_matches(path[-1], list(known.model_fields), n=1)
    hint = f"did you mean `{near[0]}`?" if near else f"known keys: {', '.join(known.model_fields)}"
    return f"{key}: no such key; {hint}"
