"""A finding: one thing a review says, with a rule, a level, a place and a message."""

from dataclasses import dataclass
from typing import Literal

from xcheck.place import Place

Level = Literal["note", "warning", "error"]
LEVELS: tuple[Level, ...] = ("note", "warning", "error")


@dataclass(frozen=True, slots=True)
class Finding:
    """rule: a name of the rule table; place: in the user's own text; subject: `stage.port`, a stage, an
    amplifier, an element or ''; message: what was read and what was expected; advice: what to do;
    cause: why two values disagree, '' elsewhere."""

    rule: str
    level: Level
    place: Place
    message: str
    subject: str = ""
    cause: str = ""
    advice: str = ""
