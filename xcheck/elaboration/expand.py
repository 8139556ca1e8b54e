"""Elaboration: bodies expanded instance by instance into one flat circuit."""

from collections.abc import Callable, Collection, Iterator, Mapping
from dataclasses import dataclass, field, replace

from xcheck.circuit.elements import Analysis, Circuit, Device, Element, Instance, Origin
from xcheck.deck.cards import Card, Deck, Field
from xcheck.elaboration.analyses import KINDS as KINDS_OF_ANALYSIS
from xcheck.elaboration.analyses import analysis_of, is_analysis, nominal_of, temperature_of
from xcheck.elaboration.context import Context
from xcheck.elaboration.controlled import behavioural, controlled
from xcheck.elaboration.currents import tell_missing
from xcheck.elaboration.definitions import Body, Branches, Definition, sort_cards
from xcheck.elaboration.devices import KINDS, code_model, device
from xcheck.elaboration.expressions import ExpressionError, Function, parse
from xcheck.elaboration.geometry import NOMINAL_CELSIUS
from xcheck.elaboration.passives import Maker, coupling, passive
from xcheck.elaboration.problems import Problems
from xcheck.elaboration.scopes import Scope
from xcheck.elaboration.sources import source
from xcheck.elaboration.words import Words, braced, opened, words_of
from xcheck.errors import CallError

MOST_ELEMENTS = 250_000
"""Elements and instances made in all, those counted twice that are kept as an instance's own; far beyond any board."""
DEEPEST_INSTANCE = 60

MAKERS: Mapping[str, Callable[[Card, Problems], Maker | None]] = {
    "r": passive, "c": passive, "l": passive, "k": coupling, "v": source, "i": source,
    "e": controlled, "f": controlled, "g": controlled, "h": controlled, "b": behavioural,
    "a": code_model, **dict.fromkeys(KINDS, device),
}  # fmt: skip
"""What makes an element of a card, by the card's letter."""


def elaborate(deck: Deck, subckt: str | None = None) -> Circuit:
    """The flat circuit of a deck, or of one of its subcircuit definitions with the pins as its ports.

    All that is wrong is in `Circuit.findings`. Raises CallError where no subcircuit of that name is defined.
    """
    return _Elaboration(deck).circuit(subckt)


@dataclass
class _Plan:
    """A body read once: what each card makes, and its instances."""

    makers: list[Maker] = field(default_factory=list)
    instances: list["_Call"] = field(default_factory=list)
    order: list["Maker | _Call"] = field(default_factory=list)


@dataclass(frozen=True)
class _Call:
    """An instance card: its nodes, the subcircuit's name, and its arguments."""

    card: Card
    nodes: tuple[Field, ...]
    subckt: Field
    arguments: Mapping[str, Field]


class _Elaboration:
    def __init__(self, deck: Deck) -> None:
        self.deck = deck
        self.problems = Problems()
        self.top = sort_cards(deck, self.problems)
        self.functions: dict[int, Mapping[str, Function]] = {}
        self.everywhere = self._global_nodes()
        self.multiplied = self._multiplied()
        self.elements: list[Element] = []
        self.instances: list[Instance] = []
        self.plans: dict[int, _Plan] = {}
        self.locals: dict[tuple[object, ...], tuple[Element, ...]] = {}
        self.full = False
        self.made = 0
        self.nominal = NOMINAL_CELSIUS

    def circuit(self, subckt: str | None) -> Circuit:
        scope = Scope(None, self._functions(self.top), self.problems)
        celsius = temperature_of(self.deck.cards, scope, self.problems)
        scope.set("temper", celsius)
        self.nominal = nominal_of(self.deck.cards, scope, self.problems)
        self._parameters(self.top, scope)
        boundary: tuple[str, ...] = ()
        if subckt is None:
            context = Context("", (), {}, self.everywhere, scope, (self.top,), self.problems, nominal=self.nominal)
            self._expand(self.top, context, ())
            analyses = self._analyses(scope)
        else:
            boundary = self._block(subckt, scope)
            analyses = ()
        if not self.full:
            tell_missing(self.elements, self.problems)
        return Circuit(
            deck=self.deck, elements=tuple(self.elements), instances=tuple(self.instances), analyses=analyses,
            directives=self.deck.directives, boundary=boundary, findings=self.problems.findings(),
            temperature=celsius,
        )  # fmt: skip

    def _block(self, name: str, scope: Scope) -> tuple[str, ...]:
        definition = self.top.subckts.get(name.lower())
        if definition is None:
            known = ", ".join(sorted(self.top.subckts)) or "none"
            raise CallError(f"{self.deck.path} defines no subcircuit `{name}` (it defines: {known})")
        inner = Scope(scope, self._functions(definition.body), self.problems)
        for key, value in definition.defaults.items():
            inner.define(key, definition.card, value)
        self._parameters(definition.body, inner)
        pins = {pin: pin for pin in definition.pins}
        bodies = (definition.body, self.top)
        context = Context("", (), pins, self.everywhere, inner, bodies, self.problems, nominal=self.nominal)
        self._expand(definition.body, context, (definition.name,))
        return definition.pins

    def _global_nodes(self) -> frozenset[str]:
        return frozenset(f.key for card in self.deck.cards if card.kind == ".global" for f in card.fields[1:])

    def _multiplied(self) -> frozenset[str]:
        """Subcircuits that some instance gives an `m=`: ngspice then writes `m={m}` on each of their elements."""
        calls = (words_of(card) for card in self.deck.cards if card.kind == "x" and "=" in card.text)
        return frozenset(words.plain[-1].key for words in calls if "m" in words.pairs and words.plain)

    def _analyses(self, scope: Scope) -> tuple[Analysis, ...]:
        return tuple(analysis_of(card, scope) for card in self.deck.cards if is_analysis(card))

    def _functions(self, body: Body) -> Mapping[str, Function]:
        """The functions that can be used in a body: its own, and those of the bodies that its text stands in."""
        known = self.functions.get(id(body))
        if known is None:
            outer = self._functions(body.outer) if body.outer is not None else {}
            own = dict(self._own_functions(body))
            known = self.functions[id(body)] = {**outer, **own} if own else outer
        return known

    def _own_functions(self, body: Body) -> Iterator[tuple[str, Function]]:
        for item in body.items:
            if isinstance(item, Branches):
                for _, branch in item.branches:
                    yield from self._own_functions(branch)
            elif item.kind == ".func":
                start = item.fields[0].end
                yield from self._function(item, Field(item.text[start:], start, len(item.text)))
            elif item.kind == ".param":
                for name, value in words_of(item).pairs.items():
                    if "(" in name:
                        text = f"{name} {value.text}"
                        yield from self._function(item, Field(text, value.start, value.end))

    def _function(self, card: Card, field: Field) -> Iterator[tuple[str, Function]]:
        """A function by its text, `f(x,y) {x*y}`."""
        head, closing, rest = field.text.strip().partition(")")
        name, opening, names = head.partition("(")
        expression = rest.strip().removeprefix("=").strip()
        if not opening or not closing or not expression:
            self.problems.say("syntax", "error", card, None, "a function is written `.func f(x) {x*2}`")
            return
        parameters = tuple(n.strip().lower() for n in names.split(",") if n.strip())
        inside = braced(expression)
        try:
            yield name.strip().lower(), Function(parameters, parse(expression if inside is None else inside))
        except ExpressionError as error:
            self.problems.expression(error, card, card.fields[-1], [])

    def _parameters(self, body: Body, scope: Scope, given: Collection[str] = ()) -> None:
        """The parameters that a body defines; given: those that the instance's card has defined, which win."""
        for card in self._cards(body, scope):
            if card.kind == ".param":
                for name, value in words_of(card).pairs.items():
                    if "(" not in name and name not in given:
                        scope.define(name, card, value)
        scope.settle()

    def _cards(self, body: Body, scope: Scope) -> Iterator[Card]:
        """The cards of a body whose conditions hold."""
        for item in body.items:
            if isinstance(item, Card):
                yield item
            else:
                chosen = self._chosen(item, scope)
                if chosen is not None:
                    yield from self._cards(chosen, scope)

    def _chosen(self, branches: Branches, scope: Scope) -> Body | None:
        for card, body in branches.branches:
            if card is None:
                return body
            start = card.fields[0].end
            condition = Field(card.text[start:].strip(), start, len(card.text))
            try:
                if scope.value(condition.text):
                    return body
            except ExpressionError as error:
                self.problems.expression(error, card, condition, scope.names())
        return None

    def _plan(self, body: Body, scope: Scope) -> _Plan:
        """A body's plan: made once, unless conditions make it depend on the instance."""
        plan = self.plans.get(id(body))
        if plan is None:
            plan = _Plan()
            seen: dict[str, Card] = {}
            for card in self._cards(body, scope):
                self._add(card, plan, seen)
            if not any(isinstance(item, Branches) for item in body.items):
                self.plans[id(body)] = plan
        return plan

    def _add(self, card: Card, plan: _Plan, seen: dict[str, Card]) -> None:
        if card.kind.startswith("."):
            if card.kind not in KNOWN_DOTS:
                self.problems.say(
                    "command-ignored",
                    "note",
                    card,
                    card.fields[0],
                    f"`{card.fields[0].text}` is not evaluated",
                )
            return
        self._node_names(card)
        earlier = seen.setdefault(card.name, card)
        if earlier is not card:
            self.problems.say(
                "duplicate-name", "error", card, card.fields[0],
                f"`{card.fields[0].text}` stands twice in one scope, first at {earlier.place()}", "rename one",
            )  # fmt: skip
        if card.kind == "x":
            call = self._call(card)
            if call is not None:
                plan.order.append(call)
            return
        maker_of = MAKERS.get(card.kind)
        if maker_of is None:
            self.problems.say("syntax", "error", card, card.fields[0], f"no element begins with `{card.kind}`")
            return
        maker = maker_of(card, self.problems)
        if maker is not None:
            plan.order.append(maker)

    def _node_names(self, card: Card) -> None:
        """Nodes with braces or quotes in their names, as in `net{slash}a`: an expression to ngspice."""
        if "{" not in card.text and "'" not in card.text:
            return
        plain = opened(words_of(card).plain)
        for word in plain[:-1] if card.kind == "x" else plain[:2]:
            if "{" in word.text or "'" in word.text:
                self.problems.say(
                    "undefined-parameter", "error", card, word,
                    f"`{word.text}`: ngspice takes what stands in braces or quotes for an expression, "
                    "in a node's name too", "rename the node",
                )  # fmt: skip

    def _call(self, card: Card) -> _Call | None:
        words: Words = words_of(card)
        plain = tuple(w for w in opened(words.plain) if w.key not in ("params:", "params", "param:"))
        if not plain:
            self.problems.say("syntax", "error", card, None, f"`{card.text[:60]}` names no subcircuit")
            return None
        return _Call(card, plain[:-1], plain[-1], words.pairs)

    def _expand(self, body: Body, context: Context, active: tuple[str, ...]) -> None:
        for step in self._plan(body, context.scope).order:
            if self.full:
                return
            if isinstance(step, _Call):
                self._instance(step, context, active)
            else:
                element = step(context)
                if element is not None:
                    self.elements.append(element)
                    self.made += 1
            if self.made > MOST_ELEMENTS and not self.full:
                self._stop(step.card if isinstance(step, _Call) else body_card(body, self.deck))

    def _stop(self, card: Card) -> None:
        self.full = True
        self.problems.say(
            "syntax", "error", card, None,
            f"more than {MOST_ELEMENTS} elements and instances; the rest is not elaborated",
            "review one block at a time with --subckt",
        )  # fmt: skip

    def _instance(self, call: _Call, context: Context, active: tuple[str, ...]) -> None:
        name = context.name(call.card)
        wanted = call.subckt.key
        definition = next((b.subckts[wanted] for b in context.bodies if wanted in b.subckts), None)
        nodes = tuple(context.node(f.key) for f in call.nodes)
        fault = self._fault(call, definition, context, active)
        if definition is None or fault:
            origin = Origin(call.card, context.path)
            self.elements.append(Device(name, "x", nodes, (), call.subckt.key, fault or "undefined", origin))
            return
        self.made += 1
        path = (*context.path, name)
        scope = context.scope
        functions = self._functions(definition.body)
        inside = any(not isinstance(i, Card) or i.kind == ".param" for i in definition.body.items)
        many = context.many
        multiplied = wanted in self.multiplied and "m" not in definition.defaults
        if definition.defaults or call.arguments or inside or multiplied or functions is not scope.functions:
            scope = Scope(context.scope, functions, self.problems)
            for key, value in definition.defaults.items():
                if key not in call.arguments:
                    scope.define(key, definition.card, value)
            for key, value in call.arguments.items():
                scope.define(key, call.card, value, context.scope)
            self._parameters(definition.body, scope, call.arguments)
            if multiplied:
                if many is None:
                    many = (scope.quiet("m") if "m" in call.arguments else None) or 1.0
                scope.set("m", many)
        identity = (id(definition), scope.values() if scope is not context.scope else (), context.key)
        pins = dict(zip(definition.pins, nodes, strict=True))
        body = definition.body
        bodies = (body, *context.bodies) if body.subckts or body.models else context.bodies
        inner = Context(
            name + ".", path, pins, self.everywhere, scope, bodies, self.problems, identity, self.nominal, many
        )
        local = self._local(definition, inner, (*active, definition.name))
        self.instances.append(
            Instance(
                name, definition.name, tuple(pins.items()), Origin(call.card, context.path),
                definition.card, definition.comments, local,
            )
        )  # fmt: skip
        self._expand(definition.body, inner, (*active, definition.name))

    def _local(self, definition: Definition, inner: Context, active: tuple[str, ...]) -> tuple[Element, ...]:
        """The instance's elements as seen from inside; made once for all instances of the same key."""
        found = self.locals.get(inner.key)
        if found is None:
            outside = self.elements, self.instances
            self.elements, self.instances = [], []
            pins = {pin: pin for pin in definition.pins}
            self._expand(definition.body, replace(inner, prefix="", path=(), pins=pins), active)
            found = self.locals[inner.key] = tuple(self.elements)
            self.elements, self.instances = outside
        return found

    def _fault(self, call: _Call, definition: Definition | None, context: Context, active: tuple[str, ...]) -> str:
        """Why an instance cannot be expanded, '' where it can; the finding is made here."""
        if definition is None:
            known = [name for body in context.bodies for name in body.subckts]
            self.problems.unknown_model(call.card, call.subckt, known, "subcircuit")
            return "undefined"
        if len(call.nodes) != len(definition.pins):
            self.problems.say(
                "pin-count", "error", call.card, call.card.fields[0],
                f"`{call.card.fields[0].text}` has {len(call.nodes)} nodes, subcircuit `{definition.name}` has "
                f"{len(definition.pins)} pins: {' '.join(definition.pins)}", "give each pin one node",
            )  # fmt: skip
            return "wrong number of nodes"
        given = [key for key in call.arguments if key != "m"]
        if (
            given
            and not definition.defaults
            and not any(not isinstance(item, Card) or item.kind == ".param" for item in definition.body.items)
        ):
            self.problems.say(
                "undefined-parameter", "error", call.card, call.arguments[given[0]],
                f"subcircuit `{definition.name}` has no parameters, so ngspice refuses `{given[0]}=`",
                "delete it, or declare the parameter on the `.subckt` card",
            )  # fmt: skip
        if definition.name in active or len(active) >= DEEPEST_INSTANCE:
            self.problems.say(
                "syntax", "error", call.card, call.subckt,
                f"subcircuit `{definition.name}` contains itself" if definition.name in active
                else f"instances nested deeper than {DEEPEST_INSTANCE}",
            )  # fmt: skip
            return "recursive"
        return ""


def body_card(body: Body, deck: Deck) -> Card:
    """A card to point at for a body as a whole."""
    return next((item for item in body.items if isinstance(item, Card)), deck.cards[0])


KNOWN_DOTS = frozenset(
    (*KINDS_OF_ANALYSIS, ".param", ".func", ".model", ".global", ".temp", ".end", ".title", ".width", ".csparam")
)
