"""Names of devices as ngspice writes them, and as the flat circuit has them.

ngspice puts a device's letter before the names of the instances around it: `v.x1.x2.v3` for `x1.x2.v3`; where x2's
definition stands inside that of x1, before each of them: `v.x1.v.x2.v3`. Nodes have no such letters.
"""


def circuit_name(device: str) -> str:
    """The flat circuit's name of a device that ngspice names."""
    *around, own = device.split(".")
    return ".".join((*(part for part in around if part != own[:1]), own))


def of_another_kind(device: str, letter: str) -> str:
    """ngspice's name of a device of another kind that stands beside the named one and is named alike but for its
    letter."""
    *around, own = device.split(".")
    return ".".join((*(letter if part == own[:1] else part for part in around), letter + own[1:]))


def engine_names(flat: str, letter: str) -> tuple[str, ...]:
    """What ngspice may call a device of the flat circuit: the likelier name first."""
    *around, own = flat.split(".")
    if not around:
        return (flat,)
    plain = ".".join((letter, *around, own))
    nested = ".".join((*(word for part in around for word in (letter, part)), own))
    return (plain,) if nested == plain else (plain, nested)
