"""Roles of a subcircuit's pins by what its author wrote: pin names, and the comment that lists connections."""

import re
from collections.abc import Mapping, Sequence
from typing import Literal

from xcheck.deck.cards import Comment

Role = Literal["in+", "in-", "out", "v+", "v-"]

NAMES: tuple[tuple[Role, re.Pattern[str]], ...] = (
    ("in+", re.compile(r"in\+|\+in|inp|ip|in_?p(os)?|vin\+|v?inp|vip|non_?inv(erting)?|plus|p|\+|np")),
    ("in-", re.compile(r"in-|-in|inn|inm|im|in_?(n|m|neg)|vin-|v?inn|v?inm|vim|vin_?n|inv(erting)?|minus|n|m|-")),
    ("out", re.compile(r"out(put)?|vo(ut)?|o")),
    ("v+", re.compile(r"v\+|\+v|vcc\+?|vdd|vp|vpos|v_?plus|vs\+|vc|avdd|v_?cc|pos|supply\+|99")),
    ("v-", re.compile(r"v-|-v|vee|vcc-|vss|vn|vneg|v_?minus|vs-|ve|avss|v_?ee|neg|gnd|supply-|50")),
)
"""Pin names met in the field, whole words, lower case (common practice)."""

WORDS: tuple[tuple[Role, re.Pattern[str]], ...] = (
    ("in+", re.compile(r"non[- _]?inv|positive (signal )?input|\bin(put)?\s*\+|\+\s*in|\binp\b")),
    ("in-", re.compile(r"inv|negative (signal )?input|\bin(put)?\s*-|-\s*in|\binn\b")),
    ("v+", re.compile(r"positive (power )?supply|\bv\+|\bvcc\b|\bvdd\b|\bvp\b|supply\s*\+")),
    ("v-", re.compile(r"negative (power )?supply|\bv-|\bvee\b|\bvss\b|\bvn\b|supply\s*-|\bground\b|\bgnd\b")),
    ("out", re.compile(r"out")),
)
"""Words of a connections comment; the first that fits names the role (`non-inverting` before `inverting`)."""


def roles_by_name(pins: Sequence[str]) -> dict[Role, str]:
    """Roles that pin names tell, each taken once; a role that two pins claim is left out."""
    claims: dict[Role, list[str]] = {}
    for pin in pins:
        for role, pattern in NAMES:
            if pattern.fullmatch(pin):
                claims.setdefault(role, []).append(pin)
                break
    return {role: found[0] for role, found in claims.items() if len(found) == 1}


def roles_by_comment(pins: Sequence[str], comments: Sequence[Comment]) -> dict[Role, str]:
    """Roles by a one-line list such as `connections: in+, in-, positive supply, negative supply, output`."""
    for comment in comments:
        _, colon, listed = comment.text.partition(":")
        for text in (listed, comment.text) if colon else (comment.text,):
            items = [t.strip().lower() for t in re.split(r"[,;|]", text) if t.strip()]
            if len(items) != len(pins):
                items = text.lower().split()
            if len(items) == len(pins):
                roles = _roles_of(items, pins)
                if {"in+", "in-", "out"} <= roles.keys():
                    return roles
    return {}


def _roles_of(items: Sequence[str], pins: Sequence[str]) -> dict[Role, str]:
    roles: dict[Role, str] = {}
    for item, pin in zip(items, pins, strict=True):
        by_name = roles_by_name([item])
        role = next(iter(by_name)) if by_name else next((r for r, p in WORDS if p.search(item)), None)
        if role is not None and role in roles:
            return {}
        if role is not None:
            roles[role] = pin
    return roles


def supplies(pins: Sequence[str], comments: Sequence[Comment], taken: Sequence[str]) -> Mapping[Role, str]:
    """The supply pins among those that are no signal pin, by comment and then by name."""
    found: dict[Role, str] = {}
    for roles in (roles_by_comment(pins, comments), roles_by_name([p for p in pins if p not in taken])):
        for role in ("v+", "v-"):
            if role in roles and roles[role] not in taken:
                found.setdefault(role, roles[role])
    return found
