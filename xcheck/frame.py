"""A review as a pandas DataFrame."""

from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

import numpy as np

from xcheck.impedance.types import PortAnswer

if TYPE_CHECKING:
    import pandas as pd


def table(decks: Iterable[tuple[str, Iterable[PortAnswer]]]) -> "pd.DataFrame":
    """One row a port and frequency; impedances complex, in ohm; NaN where a method gave none. decks: paths with their
    answers."""
    import pandas as pd

    frames = []
    for path, answers in decks:
        for answer in answers:
            form, road = answer.closed_form, answer.return_ratio
            nothing = np.full(answer.frequency.shape, np.nan)
            columns: dict[str, Any] = {
                "deck": path, "stage": answer.port.stage, "topology": answer.topology, "port": answer.port.name,
                "side": answer.port.side, "kind": answer.port.kind, "frequency_hz": answer.frequency,
                "rule_of_thumb": form.rule_of_thumb if form is not None else nothing.astype(complex),
                "closed_form": form.value if form is not None else nothing.astype(complex),
                "return_ratio": road.impedance if road is not None else nothing.astype(complex),
                "simulated": answer.simulated if answer.simulated is not None else nothing.astype(complex),
                "difference": answer.difference if answer.difference is not None else nothing,
                "verdict": answer.verdict,
            }  # fmt: skip
            frames.append(pd.DataFrame(columns))
    if not frames:
        names = "deck stage topology port side kind frequency_hz rule_of_thumb closed_form return_ratio simulated"
        return pd.DataFrame(columns=[*names.split(), "difference", "verdict"])
    return pd.concat(frames, ignore_index=True)
