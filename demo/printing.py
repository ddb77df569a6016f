"""How the invented papers print their numbers."""

from typing import Any


def starred(estimate: float | None, p: float | None) -> str:
    """`0.412***`, or nothing where the column has no such term."""
    if estimate is None or p is None:
        return ""
    stars = sum(p < level for level in (0.10, 0.05, 0.01))
    return f"{estimate:.3f}" + "*" * stars


def bracketed(error: float | None) -> str:
    """`(0.051)`, or nothing where the column has no such term."""
    return "" if error is None else f"({error:.3f})"


def percent_of(coefficient: float) -> str:
    """The coefficient times 100, as many papers read it."""
    return f"{abs(100 * coefficient):.0f}"


def share_of(chosen: Any) -> str:
    """The share of rows chosen, in whole percent."""
    return f"{100 * float(chosen.mean()):.0f}"
