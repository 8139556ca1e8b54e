"""Expressions as trees: what a behavioural source computes, with or without its parameters put in."""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Constant:
    value: float


@dataclass(frozen=True, slots=True)
class Name:
    name: str
    start: int
    end: int


@dataclass(frozen=True, slots=True)
class Call:
    """A function, or `v`/`i` of nodes and sources, whose arguments are then the words themselves."""

    function: str
    arguments: tuple["Node", ...]
    words: tuple[str, ...]
    start: int
    end: int


@dataclass(frozen=True, slots=True)
class Unary:
    operator: str
    operand: "Node"


@dataclass(frozen=True, slots=True)
class Binary:
    operator: str
    left: "Node"
    right: "Node"


@dataclass(frozen=True, slots=True)
class Choice:
    condition: "Node"
    yes: "Node"
    no: "Node"


Node = Constant | Name | Call | Unary | Binary | Choice
