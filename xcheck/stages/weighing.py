"""Weighing the evidence for an amplifier's pins: what its elements do, what its author wrote, what the deck says."""

from collections.abc import Mapping
from dataclasses import dataclass

from xcheck.circuit.elements import GROUND, Instance
from xcheck.stages.directives import PinDirective
from xcheck.stages.macromodel import SignalPins
from xcheck.stages.pins import POWER, SIGNAL, Role


@dataclass(frozen=True)
class Evidence:
    """roles: the pins that count; words: the evidence as sentences; gain_element: its name inside the instance, ''
    where the structure is not known; fault: what a directive says that the elements contradict."""

    roles: Mapping[Role, str]
    words: tuple[str, ...]
    gain_element: str = ""
    fault: str = ""


def weigh(
    instance: Instance, seen: SignalPins | None, named: Mapping[Role, str], source: str, told: PinDirective | None
) -> Evidence | None:
    """The signal pins that the evidence speaks for, None where it is too thin.

    The elements have the last word on polarity: the sign of the gain is a fact. A directive is the designer's own
    word on all else; comments and names are what an author wrote. source: where `named` comes from.
    """
    words: list[str] = []
    fault = ""
    by_structure: dict[Role, str] = {}
    if seen is not None:
        by_structure = {"in+": seen.plus, "in-": seen.minus, "out": seen.output}
        words.append(
            f"structure: gain {seen.gain:.4g} from {_input(seen.plus, seen.minus)} to `{seen.output}`, "
            f"by {seen.gain_element}"
        )
    roles = dict(by_structure)
    if told is not None:
        roles = {**by_structure, **told.roles}
        words.append(f"directive at {told.place}: {_listed(told.roles)}")
        if seen is not None and told.roles["in+"] == seen.minus and told.roles["in-"] == seen.plus:
            roles["in+"], roles["in-"] = seen.plus, seen.minus
            fault = f"the elements of `{instance.subckt}` invert from `{seen.minus}`: in+ and in- are swapped"
            words.append(f"{fault}; the elements count")
    elif set(SIGNAL) <= named.keys():
        roles = roles or dict(named)
    if set(SIGNAL) <= named.keys():
        same = all(roles[role] == named[role] for role in SIGNAL)
        contradiction = "" if same else ", which contradicts the above and does not count"
        words.append(f"{source}: {_listed(named)}{contradiction}")
    if not set(SIGNAL) <= roles.keys():
        return None
    fits = seen is not None and all(roles[role] == by_structure[role] for role in SIGNAL)
    return Evidence(roles, tuple(words), seen.gain_element if seen is not None and fits else "", fault)


def _input(plus: str, minus: str) -> str:
    if minus == GROUND:
        return f"`{plus}`"
    return f"`{minus}` (inverting)" if plus == GROUND else f"(`{plus}`, `{minus}`)"


def _listed(roles: Mapping[Role, str]) -> str:
    return ", ".join(f"{role} `{roles[role]}`" for role in (*SIGNAL, *POWER) if role in roles)
