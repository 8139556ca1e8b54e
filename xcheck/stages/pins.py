"""Roles of a subcircuit's pins by what its author wrote: pin names, and the comment that lists connections."""

import re
from collections.abc import Mapping, Sequence
from typing import Literal

from xcheck.deck.cards import Comment

Role = Literal["in+", "in-", "out", "v+", "v-"]
SIGNAL: tuple[Role, ...] = ("in+", "in-", "out")
POWER: tuple[Role, ...] = ("v+", "v-")

NAMES: tuple[tuple[Role, re.Pattern[str]], ...] = (
    ("in+", re.compile(r"in\+|\+in|inp|ip|in_?p(os)?|in_?plus|vin\+|vinp|vip|non(_?inv(erting)?)?|plus|p|\+")),
    ("in-", re.compile(r"in-|-in|inn|inm|im|in|in_?(n|m|neg|minus)|vin-|vinn|vinm|vim|inv(erting)?|minus|n|m|-")),
    ("out", re.compile(r"out(put)?|vo(ut)?|o")),
    ("v+", re.compile(r"v\+|\+v|[av]*vcc\+?|[av]*vdd|vp|vpp|vpos|v_?plus|vs\+|\+vs|vc|v_?cc|pos|supply\+")),
    ("v-", re.compile(r"v-|-v|vee|vcc-|[av]*vss|vn|vnn|vm|vneg|v_?minus|vs-|-vs|ve|v_?ee|neg|gnd|supply-")),
)
"""Pin names met in the field, whole words, lower case (common practice)."""

OTHERS = re.compile(
    r"nc\d*|n\.c\.|null\d*|off\w*|os\d*|bal\w*|comp\d*|en\w*|sd\w*|shdn\w*|i?bias|iset|i_?abc|tab|pad|sub|com"
)
"""Names of pins that op-amps have beside those: not connected, offset, compensation, enable (common practice)."""

WORDS: tuple[tuple[Role, re.Pattern[str]], ...] = (
    ("in+", re.compile(r"non[- _]?inv|positive (signal )?input|\bin(put)?\s*\+|\+\s*in|\binp\b")),
    ("in-", re.compile(r"inv|negative (signal )?input|\bin(put)?\s*-|-\s*in|\binn\b")),
    ("v+", re.compile(r"positive (power )?(supply|rail)|\bv\+|\bvcc\b|\bvdd\b|\bvp\b|supply\s*\+|\+\s*supply")),
    ("v-", re.compile(r"negative (power )?(supply|rail)|\bv-|\bvee\b|\bvss\b|\bvn\b|supply\s*-|ground\b|\bgnd\b")),
    ("out", re.compile(r"out")),
)
"""Words of a connections comment; the first that fits names the role (`non-inverting` before `inverting`)."""

HEADING = re.compile(r"\b(connections?|pin[- ]?outs?|pins|nodes|terminals|pin order)\b\s*[:=]?", re.IGNORECASE)
"""What a comment that lists connections begins with."""


def roles_by_name(pins: Sequence[str]) -> dict[Role, str]:
    """Roles that pin names tell, each taken once; a role that two pins claim is left out."""
    claims: dict[Role, list[str]] = {}
    for pin in pins:
        for role, pattern in NAMES:
            if pattern.fullmatch(pin):
                claims.setdefault(role, []).append(pin)
                break
    return {role: found[0] for role, found in claims.items() if len(found) == 1}


PACKAGE: Mapping[str, Role] = {"2": "in-", "3": "in+", "4": "v-", "6": "out", "7": "v+"}
"""Pin numbers of a single op-amp in an eight-pin package (common practice since the first ones)."""


def roles_by_package(pins: Sequence[str]) -> dict[Role, str]:
    """Roles by the numbers of the eight-pin package, where pins bear just these; pins 1, 5 and 8 may be there too. A
    model that numbers its pins in order is no package."""
    others = [pin for pin in pins if pin not in PACKAGE]
    in_order = [str(k + 1) for k in range(len(pins))]
    if not set(PACKAGE) <= set(pins) or list(pins) == in_order or not set(others) <= {"1", "5", "8"}:
        return {}
    return {role: pin for pin, role in PACKAGE.items()}


def speak_of_an_amplifier(pins: Sequence[str]) -> bool:
    """Whether pin names alone tell an op-amp: both inputs and the output, not all by single letters unless there
    are supplies too, and beside them only what op-amps have."""
    roles = roles_by_name(pins)
    if not set(SIGNAL) <= roles.keys():
        return False
    if not set(POWER) & roles.keys() and all(len(roles[r]) == 1 for r in SIGNAL):
        return False
    return all(pin in roles.values() or OTHERS.fullmatch(pin) for pin in pins)


def roles_by_comment(pins: Sequence[str], comments: Sequence[Comment]) -> dict[Role, str]:
    """Roles by the comment around a definition that lists its connections: in one line in the order of the pins,
    one line a pin in that order, or one line a pin that names it (`3 = output`). {} where none tells both inputs
    and the output."""
    texts = [c.text.replace("|", " ").strip().lower() for c in comments]
    texts = [text for text in texts if not text.startswith("xcheck:")]
    told = [_by_bars([c.text.lower() for c in comments], pins)]
    told += [_roles_of(items, pins) for items in _one_line(texts, len(pins))]
    told.append(_by_pin(texts, pins))
    told += [_by_pairs(text, pins) for text in texts]
    told += [_roles_of(items, pins) for items in _in_order(texts, len(pins))]
    return next((roles for roles in told if set(SIGNAL) <= roles.keys()), {})


def _by_bars(texts: Sequence[str], pins: Sequence[str]) -> dict[Role, str]:
    """Roles from columns of bars, one role a line: as many bars stand before its words as pins before its own, or as
    many behind them as pins behind it."""
    before: dict[Role, int] = {}
    behind: dict[Role, int] = {}
    for text in texts:
        words = HEADING.sub(" ", text).strip(" |!:\t")
        role = _role_of(words) if words else None
        if role is None:
            continue
        if role in before:
            return {}
        start = text.index(words.split()[0]) if "|" not in words and "!" not in words else 0
        before[role] = sum(text[:start].count(bar) for bar in "|!")
        behind[role] = sum(text[start:].count(bar) for bar in "|!")
    for counts, places in ((before, pins), (behind, pins[::-1])):
        if len(set(counts.values())) == len(counts) > 2 and max(counts.values()) < len(pins):
            return {role: places[count] for role, count in counts.items()}
    return {}


def _one_line(texts: Sequence[str], count: int) -> list[list[str]]:
    """The items of lines that list as many as there are pins."""
    found = []
    for text in texts:
        _, colon, listed = text.partition(":")
        for candidate in (listed, text) if colon else (text,):
            for items in (re.split(r"[,;]", candidate), candidate.split()):
                kept = [item.strip() for item in items if item.strip()]
                if len(kept) == count:
                    found.append(kept)
    return found


def _in_order(texts: Sequence[str], count: int) -> list[list[str]]:
    """The items of a list that begins at a heading and goes on over lines, one or more items each."""
    for start, text in enumerate(texts):
        heading = HEADING.match(text)
        if heading is None:
            continue
        lines = [text[heading.end() :], *texts[start + 1 :]]
        items = [item.strip() for line in lines for item in re.split(r"[,;]|\s{2,}", line) if item.strip()]
        if len(items) >= count:
            return [items[:count]]
    return []


def _by_pin(texts: Sequence[str], pins: Sequence[str]) -> dict[Role, str]:
    """Roles from lines such as `pin 3: output` or `in1 = non-inverting input`."""
    roles: dict[Role, str] = {}
    for text in texts:
        told = re.match(r"(?:pin|node|terminal)?\s*([^\s:=]+)\s*(?:[:=]|-+\s|\s)\s*(.+)", text)
        if told and told.group(1) in pins:
            role = _role_of(told.group(2))
            if role is not None and roles.setdefault(role, told.group(1)) != told.group(1):
                return {}
    return roles


def _by_pairs(text: str, pins: Sequence[str]) -> dict[Role, str]:
    """Roles from one line of pairs, `1 null 2 in- 3 in+ ...`, that names every pin."""
    words = re.split(r"[\s,;=:]+", text.strip())
    if len(words) != 2 * len(pins) or set(words[0::2]) != set(pins):
        return {}
    return _roles_of(words[1::2], words[0::2])


def _role_of(item: str) -> Role | None:
    by_name = roles_by_name([item])
    return next(iter(by_name)) if by_name else next((r for r, p in WORDS if p.search(item)), None)


def _roles_of(items: Sequence[str], pins: Sequence[str]) -> dict[Role, str]:
    roles: dict[Role, str] = {}
    for item, pin in zip(items, pins, strict=True):
        role = _role_of(item)
        if role is not None and role in roles:
            return {}
        if role is not None:
            roles[role] = pin
    return roles


def supplies(pins: Sequence[str], comments: Sequence[Comment], taken: Sequence[str]) -> Mapping[Role, str]:
    """The supply pins among those that are no signal pin, by comment and then by name."""
    found: dict[Role, str] = {}
    for roles in (roles_by_comment(pins, comments), roles_by_name([p for p in pins if p not in taken])):
        for role in POWER:
            if role in roles and roles[role] not in taken:
                found.setdefault(role, roles[role])
    return found
