"""Weighing the evidence for an amplifier's pins: what its elements do, what its author wrote, what the deck says."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from xcheck.circuit.elements import GROUND, Instance
from xcheck.stages.directives import PinDirective
from xcheck.stages.macromodel import SignalPins
from xcheck.stages.pins import POWER, SIGNAL, Role

LINEAR = "structure"
AT_THE_POINT = "structure at the operating point"
IN_PRINCIPLE = "structure in principle"
"""How it is known what the elements do. The last one follows the paths with nominal values: it knows signs and ways,
no sizes, so what an author wrote counts more."""


@dataclass(frozen=True)
class Written:
    """What somebody wrote of a model's pins: where ('comment', 'pin names', ...) and what."""

    source: str
    roles: Mapping[Role, str]


@dataclass(frozen=True)
class Evidence:
    """roles: the pins that count; words: the evidence as sentences; gain_element: its name inside the instance, ''
    where the structure is not known; fault: what a directive says that the elements contradict; conflict: what
    contradicts what, '' for nothing."""

    roles: Mapping[Role, str]
    words: tuple[str, ...]
    gain_element: str = ""
    fault: str = ""
    conflict: str = ""


def weigh(
    instance: Instance, seen: SignalPins | None, how: str, written: Sequence[Written], told: PinDirective | None
) -> Evidence | None:
    """The signal pins that the evidence speaks for, None where it is too thin.

    The elements have the last word on polarity: the sign of the gain is a fact. A directive is the designer's own
    word on all else; comments and names are what an author wrote. how: whence `seen` is known.
    """
    words: list[str] = []
    fault = ""
    by_structure: dict[Role, str] = {}
    authored = [w for w in written if set(SIGNAL) <= w.roles.keys()]
    followed = ""
    if seen is not None:
        by_structure = {"in+": seen.plus, "in-": seen.minus, "out": seen.output}
        gain = "" if how == IN_PRINCIPLE else f" {seen.gain:.4g}"
        followed = f"{how}: gain{gain} from {_input(seen.plus, seen.minus)} to `{seen.output}`, by {seen.gain_element}"
        words += [followed] if how != IN_PRINCIPLE else []
    roles = dict(by_structure)
    if told is not None:
        roles = {**by_structure, **told.roles}
        words.append(f"directive at {told.place}: {_listed(told.roles)}")
        if seen is not None and told.roles["in+"] == seen.minus and told.roles["in-"] == seen.plus:
            roles["in+"], roles["in-"] = seen.plus, seen.minus
            fault = f"the elements of `{instance.subckt}` invert from `{seen.minus}`: in+ and in- are swapped"
            words.append(f"{fault}; the elements count")
    elif authored and (seen is None or how == IN_PRINCIPLE):
        roles = dict(authored[0].roles)
    contradicted = []
    for one in authored:
        same = not roles or all(roles[role] == one.roles[role] for role in SIGNAL)
        words.append(f"{one.source}: {_listed(one.roles)}{'' if same else ', which does not count'}")
        if not same:
            contradicted.append(f"{one.source} ({_listed(one.roles, SIGNAL)})")
    if not set(SIGNAL) <= roles.keys():
        return None
    words += [followed] if how == IN_PRINCIPLE and followed else []
    fits = seen is not None and all(roles[role] == by_structure[role] for role in SIGNAL)
    if seen is not None and not fits and told is None:
        contradicted.append(f"{how} ({_listed(by_structure, SIGNAL)})")
    conflict = ""
    if contradicted and told is None:
        conflict = f"taken are {_listed(roles, SIGNAL)}, against {' and '.join(contradicted)}"
    element = seen.gain_element if seen is not None and fits else ""
    return Evidence(roles, tuple(words), element, fault, conflict)


def _input(plus: str, minus: str) -> str:
    if minus == GROUND:
        return f"`{plus}`"
    return f"`{minus}` (inverting)" if plus == GROUND else f"(`{plus}`, `{minus}`)"


def _listed(roles: Mapping[Role, str], which: Sequence[Role] = (*SIGNAL, *POWER)) -> str:
    return ", ".join(f"{role} `{roles[role]}`" for role in which if role in roles)
