"""One port over frequency: as CSV, and as a picture of magnitude and phase with every method's curve."""

from pathlib import Path
from typing import Any

import numpy as np

from xcheck.circuit.arrays import Complex
from xcheck.errors import OutputError
from xcheck.impedance.types import PortAnswer

STYLES = {
    "rule of thumb": ":", "closed form": "-", "return ratio": "--", "simulated": "o",
}  # fmt: skip
"""Line styles, so that curves can be told apart without colour."""


def curves(answer: PortAnswer) -> dict[str, Complex]:
    """Curves by method, those that exist (ohm, shape (F,))."""
    form, road = answer.closed_form, answer.return_ratio
    found = {
        "rule of thumb": form.rule_of_thumb if form is not None else None,
        "closed form": form.value if form is not None else None,
        "return ratio": road.impedance if road is not None else None,
        "simulated": answer.simulated,
    }
    return {name: values for name, values in found.items() if values is not None}


def csv(answer: PortAnswer) -> str:
    """A header and one row a frequency: each method's real and imaginary part, magnitude (ohm) and phase (degrees)."""
    import pandas as pd

    columns: dict[str, Any] = {"frequency_hz": answer.frequency}
    for name, values in curves(answer).items():
        key = name.replace(" ", "_")
        columns |= {
            f"{key}_re": values.real, f"{key}_im": values.imag, f"{key}_ohm": np.abs(values),
            f"{key}_deg": np.degrees(np.angle(values)),
        }  # fmt: skip
    if answer.difference is not None:
        columns["difference"] = answer.difference
    return str(pd.DataFrame(columns).to_csv(index=False))


def picture(answer: PortAnswer, path: Path) -> None:
    """Writes an SVG or PNG by the file's ending. Raises OutputError."""
    try:
        from matplotlib.figure import Figure
    except ImportError as error:
        raise OutputError("a picture needs matplotlib: pip install 'xcheck[picture]'") from error
    figure = Figure(figsize=(8, 6), layout="constrained")
    size, angle = figure.subplots(2, 1, sharex=True)
    for name, values in curves(answer).items():
        good = np.isfinite(values) & (np.abs(values) > 0)
        if not np.any(good):
            continue
        options: dict[str, Any] = {"markersize": 3.5, "markerfacecolor": "none"} if name == "simulated" else {}
        size.loglog(answer.frequency[good], np.abs(values[good]), STYLES[name], label=name, **options)
        angle.semilogx(answer.frequency[good], np.degrees(np.angle(values[good])), STYLES[name], **options)
    size.set_ylabel("|Z| / ohm")
    angle.set_ylabel("phase / degrees")
    angle.set_xlabel("frequency / Hz")
    size.set_title(f"{answer.port.side} impedance of {answer.port.subject} ({answer.topology}, {answer.verdict})")
    for axis in (size, angle):
        axis.grid(visible=True, which="major", alpha=0.4)
    size.legend()
    try:
        figure.savefig(path, dpi=120)
    except OSError as error:
        raise OutputError(f"{path} cannot be written: {error.strerror or error}") from error
