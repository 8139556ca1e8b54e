"""Rules: evidence to findings. One function a rule, all of them listed here in running order.

A new rule is a function `check(evidence) -> Iterable[Finding]` in the module of its family, a line in
RULES, and its decks in `tests/rules/`. Rules without a function are the findings of the parts that read the
deck.
"""

from xcheck.finding import Finding
from xcheck.reviewed import Evidence
from xcheck.rules.data_sheets import model_differs_from_data_sheet
from xcheck.rules.feedback import feedback_missing, feedback_positive
from xcheck.rules.impedances import impedance_disagrees, methods_disagree, rule_of_thumb_fails
from xcheck.rules.limits import input_outside_common_mode, output_current_exceeded
from xcheck.rules.models import amplifier_ideal
from xcheck.rules.operating_point import (
    not_simulated,
    operating_point_fails,
    output_at_rail,
    simulation_fails,
)
from xcheck.rules.pins import inputs_tied, output_grounded, outputs_tied, pin_order
from xcheck.rules.rule import Rule, one_a_card
from xcheck.rules.scales import femto_for_farad, milli_for_mega
from xcheck.rules.supplies import supply_missing, supply_reversed
from xcheck.rules.values import comma_in_number, digit_after_suffix, trailing_text
from xcheck.rules.wiring import ground_missing, input_without_dc_path, node_dangling

__all__ = ["RULES", "Rule", "run_rules"]

RULES: tuple[Rule, ...] = (
    # how the text is read
    Rule("syntax", "error", "a line that is no card, a missing field, an unbalanced brace", also=("warning", "note")),
    Rule("file-missing", "error", "an included file or section that is not there", also=("warning",)),
    Rule("include-outside", "error", "an include that leaves the allowed folders"),
    Rule("undefined-model", "error", "a model or subcircuit that is defined nowhere"),
    Rule("undefined-parameter", "error", "an expression with an unknown name"),
    Rule("pin-count", "error", "an instance with more or fewer nodes than its subcircuit"),
    Rule("duplicate-name", "error", "two elements of one name in one scope"),
    Rule("shadowed-definition", "warning", "a name that is defined twice"),
    Rule("text-after-end", "warning", "cards after .end, which ngspice still reads"),
    Rule("command-ignored", "note", "commands and cards that the review does not execute"),
    # how values are read
    Rule("value-missing", "error", "an element without its value"),
    Rule("milli-for-mega", "error", "1M where a megohm is meant: M is milli", milli_for_mega),
    Rule("digit-after-suffix", "error", "4k7, 2R2, 1u5: the digit is lost", digit_after_suffix),
    Rule("femto-for-farad", "error", "10F on a capacitor: F is femto", femto_for_farad),
    Rule("comma-in-number", "error", "1,5k: the comma ends the number", comma_in_number),
    Rule("trailing-text", "note", "text after a number, which is ignored", trailing_text, also=("error",)),
    # how the circuit is wired
    Rule("ground-missing", "error", "no node 0 (or gnd)", ground_missing),
    Rule("node-dangling", "warning", "a node with one terminal that is no port", node_dangling),
    Rule("input-without-dc-path", "error", "an amplifier input without a DC path", input_without_dc_path),
    Rule("inputs-tied", "error", "both inputs of an amplifier on one node", inputs_tied),
    Rule("outputs-tied", "error", "two outputs, or an output and a source, on one node", outputs_tied),
    Rule("output-grounded", "error", "an output on ground or a supply", output_grounded),
    Rule("pin-order", "error", "nodes that do not fit the pins that a model declares", pin_order),
    Rule("supply-missing", "error", "a supply pin that no source reaches", supply_missing),
    Rule("supply-reversed", "error", "the positive supply below the negative one", supply_reversed),
    Rule("amplifier-pins-uncertain", "warning", "evidence for an amplifier's pins conflicts or is too thin"),
    Rule("feedback-positive", "error", "net feedback at DC is positive", feedback_positive, also=("note",)),
    Rule("feedback-missing", "warning", "no way from output to inverting input", feedback_missing, also=("note",)),
    # how it is simulated
    Rule("operating-point-fails", "error", "ngspice finds no operating point", operating_point_fails),
    Rule("simulation-fails", "warning", "ngspice fails for another reason", simulation_fails),
    Rule("not-simulated", "note", "ngspice was wanted and is not there", not_simulated),
    Rule("output-at-rail", "error", "an output within reach of its supply", output_at_rail),
    Rule("input-outside-common-mode", "warning", "an input outside its common-mode range", input_outside_common_mode),
    Rule("output-current-exceeded", "warning", "an output current beyond the data sheet's", output_current_exceeded),
    Rule(
        "model-differs-from-data-sheet",
        "warning",
        "a model off its data sheet by more than a factor of 3",
        model_differs_from_data_sheet,
    ),
    Rule("amplifier-ideal", "warning", "a model lacks what a reported port depends on", amplifier_ideal),
    # what the stages do
    Rule("impedance-disagrees", "error", "simulated and analytic impedance differ", impedance_disagrees),
    Rule("methods-disagree", "error", "two exact methods differ: a fault of xcheck", methods_disagree),
    Rule("rule-of-thumb-fails", "note", "the ideal value is off by over 10 % in the band", rule_of_thumb_fails),
)


def run_rules(evidence: Evidence) -> tuple[Finding, ...]:
    """The findings of all rules, by place, each card's once. A rule that raises is a fault of xcheck and
    ends the review: silence would pass for a clean deck."""
    return one_a_card(f for rule in RULES if rule.check is not None for f in rule.check(evidence))
