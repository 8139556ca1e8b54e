"""Numbers as an engineer writes them: SI values in, text out. Nothing is scaled before this point.

Text is plain ASCII, because messages end in logs and terminals of every kind; with `symbols`, 'Ohm', 'u' and
'deg' become the ohm, micro and degree signs.
"""

import math

PREFIXES = {
    -15: "f",
    -12: "p",
    -9: "n",
    -6: "u",
    -3: "m",
    0: "",
    3: "k",
    6: "M",
    9: "G",
    12: "T",
}
"""Power of ten to SI prefix (SI Brochure, table of prefixes). M is mega here, as everywhere but in a deck."""

SYMBOLS = {"Ohm": "\N{GREEK CAPITAL LETTER OMEGA}", "u": "\N{MICRO SIGN}", "deg": "\N{DEGREE SIGN}"}


def engineering(value: float, unit: str = "", digits: int = 3, *, symbols: bool = False) -> str:
    """A value (SI) with a fixed number of significant digits: 10000, 'Ohm' gives '10.0 kOhm'.

    Infinite gives 'infinite', what is no number 'undefined'; below 1 f or above 999 T it is '1.00e+20 Ohm'.
    """
    return _write(value, unit, digits, symbols, keep_zeros=True)


def shortest(value: float, unit: str = "", digits: int = 6, *, symbols: bool = False) -> str:
    """The same with no more digits than the value has: '4.7 kOhm'. For values that somebody wrote."""
    return _write(value, unit, digits, symbols, keep_zeros=False)


def polar(value: complex, unit: str = "", digits: int = 3, *, symbols: bool = False) -> str:
    """Magnitude and phase: '10.0 kOhm at -45.0 deg'; no phase for zero and infinity."""
    size = abs(value)
    text = engineering(size, unit, digits, symbols=symbols)
    if size == 0 or not math.isfinite(size):
        return text
    return f"{text} at {phase(value, symbols=symbols)}"


def phase(value: complex, *, symbols: bool = False) -> str:
    """The phase of a value in degrees with one decimal: '-45.0 deg'."""
    degrees = math.degrees(math.atan2(value.imag, value.real))
    text = f"{degrees:.1f}"
    text = "0.0" if text == "-0.0" else text
    return text + SYMBOLS["deg"] if symbols else f"{text} deg"


def percent(ratio: float, digits: int = 2) -> str:
    """A ratio as per cent with some significant digits: 0.0123 gives '1.2 %'."""
    if not math.isfinite(ratio):
        return "infinite" if math.isinf(ratio) else "undefined"
    hundredfold = 100.0 * ratio
    if hundredfold != 0 and not 1e-4 <= abs(hundredfold) < 1e5:
        return f"{hundredfold:.{digits - 1}e} %"
    rounded = float(f"{hundredfold:.{digits - 1}e}")
    decimals = 0 if rounded == 0 else max(0, digits - 1 - math.floor(math.log10(abs(rounded))))
    return f"{rounded:.{decimals}f} %"


def _write(value: float, unit: str, digits: int, symbols: bool, *, keep_zeros: bool) -> str:
    shown = SYMBOLS.get(unit, unit) if symbols else unit
    if math.isnan(value):
        return "undefined"
    if math.isinf(value):
        return "infinite" if value > 0 else "minus infinite"
    if value == 0:
        return f"0 {shown}".rstrip()
    rounded = float(f"{value:.{digits - 1}e}")
    exponent = math.floor(math.log10(abs(rounded)))
    step = 3 * (exponent // 3)
    if step not in PREFIXES:
        figures, _, power = f"{rounded:.{digits - 1}e}".partition("e")
        return f"{figures if keep_zeros else _trimmed(figures)}e{power} {shown}".rstrip()
    prefix = SYMBOLS.get(PREFIXES[step], PREFIXES[step]) if symbols else PREFIXES[step]
    number = f"{rounded / 10.0**step:.{max(0, digits - 1 - (exponent - step))}f}"
    return f"{number if keep_zeros else _trimmed(number)} {prefix}{shown}".rstrip()


def _trimmed(number: str) -> str:
    return number.rstrip("0").rstrip(".") if "." in number else number
