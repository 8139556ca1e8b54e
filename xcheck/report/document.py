"""A review as a JSON document; `schema.json` beside this file says what every key means."""

import json
import math
from pathlib import Path
from typing import Any

from xcheck.finding import Finding
from xcheck.impedance.types import PortAnswer
from xcheck.report.spots import nearest, number, pair, quoted, spot_frequencies
from xcheck.reviewed import DeckReview, Evidence, Outcome
from xcheck.simulate.types import EngineInfo
from xcheck.stages.types import Amplifier, Quantity
from xcheck.version import __version__

FORMAT = 1
SCHEMA = Path(__file__).with_name("schema.json")


def document(outcome: Outcome) -> dict[str, Any]:
    """The whole review as plain data."""
    summary = outcome.summary
    return {
        "format": FORMAT,
        "xcheck": __version__,
        "engine": engine(outcome.engine),
        "decks": [_deck(d) for d in outcome.decks],
        "summary": {
            "decks": summary.decks, "stages": summary.stages, "errors": summary.errors,
            "warnings": summary.warnings, "notes": summary.notes,
        },
    }  # fmt: skip


def render(outcome: Outcome) -> str:
    """The document as text."""
    return json.dumps(document(outcome), indent=1, allow_nan=False) + "\n"


def engine(info: EngineInfo) -> dict[str, Any]:
    """Which simulator was found."""
    return {
        "name": info.name, "available": info.available, "version": info.version,
        "code_models": info.code_models, "reason": info.reason,
    }  # fmt: skip


def _deck(review: DeckReview) -> dict[str, Any]:
    evidence = review.evidence
    found: dict[str, Any] = {
        "path": review.path, "title": review.title, "unreadable": review.unreadable, "amplifiers": [], "stages": [],
        "references": [], "band_hz": None, "findings": [finding(f) for f in review.findings], "simulation": None,
    }  # fmt: skip
    if evidence is None:
        return found
    found["amplifiers"] = [amplifier(a) for a in evidence.partition.amplifiers]
    found["references"] = list(evidence.partition.references)
    found["band_hz"] = list(evidence.band)
    found["band_declared"] = evidence.band_declared
    found["simulated_from"] = evidence.simulation.taken_from if evidence.simulation is not None else ""
    if evidence.simulation is not None:
        found["simulation"] = {
            "failure": evidence.simulation.failure, "failed_step": evidence.simulation.failed_step,
            "messages": list(evidence.simulation.messages), "left_out": list(evidence.simulation.left_out),
        }  # fmt: skip
    for stage in evidence.partition.stages:
        recognised = evidence.recognised[stage.name]
        found["stages"].append(
            {
                "name": stage.name,
                "topology": recognised.topology,
                "seen": recognised.seen,
                "amplifiers": [a.name for a in stage.amplifiers],
                "ports": [_port(evidence, evidence.by_subject[p.subject]) for p in stage.ports],
            }
        )
    return found


def amplifier(a: Amplifier) -> dict[str, Any]:
    """An amplifier with its pins, evidence and open-loop values."""
    return {
        "name": a.name, "model": a.subckt, "kind": a.kind, "non_inverting": a.non_inverting, "inverting": a.inverting,
        "output": a.output, "positive_supply": a.positive_supply, "negative_supply": a.negative_supply,
        "evidence": list(a.evidence),
        "open_loop": {name: _quantity(q) for name, q in a.open_loop.values.items()},
        "not_known_because": a.open_loop.reason if a.open_loop.model is None else "",
    }  # fmt: skip


def _quantity(quantity: Quantity) -> dict[str, Any]:
    value: Any = quantity.value
    if isinstance(value, tuple):
        value = list(value)
    elif value is not None and not math.isfinite(value):
        value = None
    return {"value": value, "from": quantity.origin}


def _port(evidence: Evidence, answer: PortAnswer) -> dict[str, Any]:
    port, form = answer.port, answer.closed_form
    middle = quoted(evidence)
    rule = None
    if form is not None:
        size = abs(complex(form.rule_of_thumb[middle]))
        rule = size if math.isfinite(size) else None
    return {
        "name": port.name, "side": port.side, "kind": port.kind, "node": port.node,
        "driven_by": "current" if port.current_driven else "voltage",
        "rule_of_thumb_ohm": rule,
        "rule_of_thumb": form.rule_text if form is not None else None,
        "formula": form.formula if form is not None else None,
        "formula_with_numbers": form.numbers if form is not None else None,
        "closed_form_exact": form.exact if form is not None else None,
        "holds_to_hz": dict(answer.holds_to_hz),
        "spots": [_spot(answer, hertz) for hertz in spot_frequencies(answer.frequency, evidence.options)],
        "worst_difference": _worst(answer),
        "verdict": answer.verdict,
        "unchecked_because": answer.unchecked_because,
        "notes": list(answer.notes),
    }  # fmt: skip


def _spot(answer: PortAnswer, hertz: float) -> dict[str, Any]:
    index = nearest(answer.frequency, hertz)
    form, road = answer.closed_form, answer.return_ratio
    return {
        "frequency_hz": hertz,
        "rule_of_thumb": pair(form.rule_of_thumb if form is not None else None, index),
        "closed_form": pair(form.value if form is not None else None, index),
        "return_ratio": pair(road.impedance if road is not None else None, index),
        "data_sheet": pair(answer.data_sheet, index),
        "simulated": pair(answer.simulated, index),
        "difference": number(answer.difference, index),
    }


def _worst(answer: PortAnswer) -> float | None:
    if answer.difference is None:
        return None
    worst = float(answer.difference.max())
    return worst if math.isfinite(worst) else None


def finding(f: Finding) -> dict[str, Any]:
    """A finding with its place."""
    return {
        "rule": f.rule, "level": f.level, "file": f.place.file, "line": f.place.line, "column": f.place.column,
        "end_column": f.place.end_column, "subject": f.subject, "message": f.message, "cause": f.cause,
        "advice": f.advice,
    }  # fmt: skip
