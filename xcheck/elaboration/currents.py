"""Whether each current that something reads flows through an element that is there."""

from collections.abc import Iterator, Sequence
from difflib import get_close_matches

from xcheck.circuit.elements import Controlled, Device, Element
from xcheck.elaboration.affine import probes_in
from xcheck.elaboration.problems import Problems


def tell_missing(elements: Sequence[Element], problems: Problems) -> None:
    """A finding for each card that reads the current of an element that the deck does not have."""
    known = {element.name for element in elements}
    for element in elements:
        for name in _read(element):
            if name not in known:
                sources = (
                    [e.name for e in elements if e.name.rpartition(".")[2][:1] == "v"] if len(known) < 5000 else []
                )
                near = get_close_matches(name, sources, n=2)
                problems.say(
                    "undefined-parameter", "error", element.origin.card, None,
                    f"it reads the current through `{name}`, which is not there",
                    f"did you mean `{near[0]}`?" if near else "name a voltage source of the deck", element.name,
                )  # fmt: skip


def _read(element: Element) -> Iterator[str]:
    if isinstance(element, Controlled):
        yield from (term.source for term in element.terms if term.source)
    elif isinstance(element, Device):
        if element.control:
            yield element.control
        if element.behaviour is not None:
            yield from (words[0] for letter, words in probes_in(element.behaviour.tree) if letter == "i")
        yield from (word for word, kind in element.connections if kind == "source")
