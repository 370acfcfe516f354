"""Chemical equations: "2 A + B -> C", "A <=> B"."""

import re

_SIDE = re.compile(r"^\s*(?:(\d+(?:\.\d+)?)\s+)?([A-Za-z_][A-Za-z0-9_]*)\s*$")


def parse(text: str) -> tuple[dict[str, float], dict[str, float], bool]:
    """Return (left, right, reversible) with coefficients; ValueError says what cannot be read."""
    reversible = "<=>" in text
    sides = text.split("<=>" if reversible else "->")
    if len(sides) != 2:
        raise ValueError("an equation has one arrow, -> or <=>")
    left, right = (_side(side) for side in sides)
    if not left and not right:
        raise ValueError("an equation has a species on at least one side")
    return left, right, reversible


def _side(text: str) -> dict[str, float]:
    result: dict[str, float] = {}
    for part in text.split("+") if text.strip() else []:
        found = _SIDE.match(part)
        if not found:
            raise ValueError(f"{part.strip()!r} is not a species with its coefficient")
        if not 0.0 < float(found[1] or 1.0) < 1e6:
            raise ValueError(f"the coefficient of {found[2]} is not a usable number")
        result[found[2]] = result.get(found[2], 0.0) + float(found[1] or 1.0)
    return result
