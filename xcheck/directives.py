"""Directives in a deck: comment lines `* xcheck: WORD ARGUMENT...` that concern the review as a whole."""

from difflib import get_close_matches

from xcheck.deck.cards import Directive
from xcheck.deck.numbers import read_number
from xcheck.finding import Finding

WORDS = ("amplifier", "band", "port")
"""Words that a directive can begin with; `amplifier` and `port` are read where those are found."""

BAND_FORM = "write it as `* xcheck: band LOW HIGH` in Hz, for example `* xcheck: band 20 20k`"


def band_of(directives: tuple[Directive, ...]) -> tuple[tuple[float, float] | None, tuple[Finding, ...]]:
    """The declared band (Hz, low below high; the last one counts) and what is wrong with directives."""
    band: tuple[float, float] | None = None
    findings: list[Finding] = []
    for directive in directives:
        word = directive.words[0].lower() if directive.words else ""
        if word == "band":
            read = _read_band(directive)
            band = read or band
            if read is None:
                findings.append(_refusal(directive, f"`{' '.join(directive.words)}` is no band", BAND_FORM))
        elif word not in WORDS:
            near = get_close_matches(word, WORDS, n=1)
            hint = f"did you mean `{near[0]}`?" if near else f"known words: {', '.join(WORDS)}"
            findings.append(_refusal(directive, f"`{word}` is no directive of xcheck", hint))
    return band, tuple(findings)


def _read_band(directive: Directive) -> tuple[float, float] | None:
    ends = [read_number(word) for word in directive.words[1:]]
    if len(ends) != 2 or ends[0] is None or ends[1] is None:
        return None
    low, high = ends[0].value, ends[1].value
    return (low, high) if 0 < low < high else None


def _refusal(directive: Directive, message: str, advice: str) -> Finding:
    return Finding("syntax", "error", directive.place, message, advice=advice)
