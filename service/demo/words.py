"""Enclosures in words, rounded so that they stay true."""

from decimal import ROUND_CEILING, ROUND_FLOOR, Decimal

from service.processes.base import JSON

DIGITS = 6

CAUTION = """\
What these numbers are: bounds that hold for the mathematical model stated above, with rounding included.
What they are not: a statement about the real structure or the real water. Whether the model fits reality,
and what the local codes demand, is for a licensed engineer to decide."""

_NAMES = {
    "friedrichs": "Friedrichs constant: no function that vanishes on the held part of the boundary is larger "
    "than this times its gradient",
    "poincare": "Poincaré constant: no function deviates from its mean by more than this times its gradient",
}


def enclosures(result: JSON) -> list[str]:
    """One paragraph per constant of a result document."""
    return [_paragraph(name, found) for name, found in result["constants"].items()]


def rounded(lower: float, upper: float) -> tuple[str, str]:
    """Both ends with six digits, the lower rounded down and the upper up."""
    return _digits(lower, ROUND_FLOOR), _digits(upper, ROUND_CEILING)


def _paragraph(name: str, found: JSON) -> str:
    lines = [_NAMES.get(name, name)]
    if found.get("lower") is not None and found.get("upper") is not None:
        lower, upper = rounded(found["lower"], found["upper"])
        unit = f" {found['unit']}" if found.get("unit") not in (None, "", "1") else ""
        proof = "proved" if found.get("rigour") == "guaranteed" else "estimated"
        lines.append(f"    between {lower} and {upper}{unit}  ({proof}{_width(found)})")
    if found.get("statement"):
        lines.append(f"    {found['statement']}")
    return "\n".join(lines)


def _width(found: JSON) -> str:
    width = found.get("relative_width")
    return "" if width is None else f"; the two ends differ by {100 * width:.2g} %"


def _digits(value: float, rounding: str) -> str:
    exact = Decimal(value)
    if exact == 0:
        return "0"
    step = Decimal(1).scaleb(exact.adjusted() - DIGITS + 1)
    return f"{exact.quantize(step, rounding=rounding):f}"
