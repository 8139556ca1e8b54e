"""The deck as ngspice gets it: the user's harmless cards with the cuts written in, test signals of its own silenced."""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field

from xcheck.circuit.elements import GROUND, Circuit, Controlled, Coupling, Device, Element, Passive, Source
from xcheck.deck.cards import Card
from xcheck.simulate.cuts import CutWriter, Need
from xcheck.simulate.sanitize import ac_parts, is_options, options_text
from xcheck.simulate.variants import TOP, Variant, variants_of
from xcheck.stages.types import Partition

TITLE = "deck under review"
OPEN_AT_AC = 1e18
"""Henry: keeps an open pin's DC level at ground and lets nothing through at any frequency of interest."""
PIVOTING = ".options pivrel=0.1"
"""How small a pivot may be beside the others of its column; a deck's own wish counts. With ngspice's 0.001, 5.7 MOhm
behind a follower came out 2e-7 off at 2 Hz, with this 2e-12; it costs a tenth of the time. Nonlinear decks are without
it: the search for an operating point fails more often with it."""
_PLAIN = Variant("", Need())


@dataclass
class Block:
    """A scope: its `.subckt` card (None for the top), what it holds in order, and its closing card."""

    opening: Card | None
    items: "list[Card | Block]" = field(default_factory=list)
    closing: Card | None = None


def blocks_of(cards: Sequence[Card]) -> Block:
    """The cards as nested scopes."""
    stack = [Block(None)]
    for card in cards:
        if card.kind in (".subckt", ".macro"):
            block = Block(card)
            stack[-1].items.append(block)
            stack.append(block)
        elif card.kind in (".ends", ".eom") and len(stack) > 1:
            stack.pop().closing = card
        else:
            stack[-1].items.append(card)
    return stack[0]


def unused_mark(cards: Sequence[Card]) -> str:
    """A word that stands in none of the cards, to begin the names of what is added."""
    text = "\n".join(card.text.lower() for card in cards)
    mark = "xcut"
    while mark in text:
        mark += "q"
    return mark


def reviewed_block(circuit: Circuit, top: Block) -> Block | None:
    """The definition whose pins are the circuit's boundary, None where the whole deck is under review."""
    if not circuit.boundary:
        return None
    own = {id(e.origin.card) for e in circuit.elements if not e.origin.path}
    own |= {id(i.origin.card) for i in circuit.instances if not i.origin.path}
    for item in top.items:
        if isinstance(item, Block) and own & {id(c) for c in item.items if isinstance(c, Card)}:
            return item
    return None


def deck_lines(
    top: Block, block: Block | None, writer: CutWriter, circuit: Circuit, partition: Partition | None
) -> list[str]:
    """The lines of one load; partition None: before the circuit is split. Raises NoCut where a subcircuit's text cannot
    be copied."""
    texts = variants_of(writer.needs, writer.terminals.instances, writer.mark)
    lines = [TITLE, *_pivoting(circuit)]
    if writer.globals:
        lines.append(f".global {' '.join(writer.globals)}")
    if block is None or block.opening is None:
        lines += texts[TOP][0].need.added()
        lines += _body(top, texts[TOP][0], texts)
    else:
        texts[id(block.opening)] = texts[TOP]
        settings = Block(None, [i for i in top.items if isinstance(i, Block) or i.kind.startswith(".")])
        lines += _body(settings, _PLAIN, texts)
        pins = circuit.boundary
        lines.append(f"{writer.root} {' '.join(pins)} {block.opening.fields[1].text}")
    if partition is not None:
        lines += _ties(circuit, partition, writer)
    return [*lines, ".end"]


def _pivoting(circuit: Circuit) -> list[str]:
    if any(isinstance(e, Device) for e in circuit.elements):
        return []
    said = any(field.key == "pivrel" for card in circuit.deck.cards if is_options(card) for field in card.fields)
    return [] if said else [PIVOTING]


def _body(block: Block, text: Variant, texts: Mapping[int, Sequence[Variant]]) -> Iterator[str]:
    for item in block.items:
        if isinstance(item, Card):
            line = _line(item, text)
            if line:
                yield line
        else:
            for variant in texts.get(id(item.opening), (_PLAIN,)):
                yield from _definition(item, variant, texts)


def _definition(block: Block, text: Variant, texts: Mapping[int, Sequence[Variant]]) -> Iterator[str]:
    card = block.opening
    if card is None:
        return
    name = card.fields[1] if len(card.fields) > 1 else card.fields[0]
    yield card.text[: name.start] + (text.name or name.text) + card.text[name.end :]
    yield from text.need.added()
    yield from _body(block, text, texts)
    if block.closing is not None:
        yield block.closing.fields[0].text if text.name else block.closing.text


def _line(card: Card, text: Variant) -> str:
    """A card's text with its edits, without AC parts; '' where nothing is left."""
    if is_options(card):
        return options_text(card)
    edits = [*text.edits.get(id(card), ()), *((start, end, "") for start, end in ac_parts(card))]
    line = card.text
    for start, end, new in sorted(edits, reverse=True):
        line = line[:start] + new + line[end:]
    return line


def _ties(circuit: Circuit, partition: Partition, writer: CutWriter) -> list[str]:
    """What holds pins that the outside leaves open, so that ngspice has an operating point: supply pins are at ground
    (rails do not move at AC); other pins of a block, or of a deck without any source, through an inductor that is
    open at AC, where no other path would settle their DC level."""
    held = {n for e in circuit.elements if isinstance(e, Source) and e.kind == "v" for n in e.nodes}
    open_ends = dict.fromkeys(circuit.boundary)
    if not any(isinstance(e, Source) for e in circuit.elements):
        open_ends |= dict.fromkeys(p.node for s in partition.stages for p in s.ports if p.side == "input")
    own = {name for a in partition.amplifiers for name in a.elements}
    loaded = {n for e in circuit.elements if e.name not in own for n in e.nodes}
    rails = [n for n, why in partition.stiff.items() if why == "rail" and "." not in n and n not in held | loaded]
    grounded = {GROUND, *rails}
    loose = [n for n in open_ends if n not in grounded and "." not in n]
    settled = _settled(circuit, grounded) if loose else set()
    lines = [f"v{writer.mark}t{k} {node} 0 dc 0" for k, node in enumerate(rails)]
    for k, node in enumerate(loose):
        if node not in settled:
            lines.append(f"l{writer.mark}t{k} {node} 0 {OPEN_AT_AC!r}")
            settled |= _settled(circuit, {node})
    return lines


def _settled(circuit: Circuit, start: set[str]) -> set[str]:
    """The nodes with a DC path to some nodes."""
    beside: dict[str, list[tuple[str, ...]]] = {}
    for element in circuit.elements:
        if _conducts(element):
            # a controlled source or a device settles its nodes among each other
            for node in element.nodes:
                beside.setdefault(node, []).append(element.nodes)
    reached = set(start)
    ahead = list(start)
    while ahead:
        for nodes in beside.get(ahead.pop(), ()):
            for node in nodes:
                if node not in reached:
                    reached.add(node)
                    ahead.append(node)
    return reached


def _conducts(element: Element) -> bool:
    match element:
        case Passive():
            return element.kind != "c"
        case Source():
            return element.kind == "v"
        case Controlled():
            return element.kind in "eh"
        case Device():
            return True
        case Coupling():
            return False
