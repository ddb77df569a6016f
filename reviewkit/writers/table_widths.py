"""How the columns of a table share the width that there is."""

from collections.abc import Sequence


def column_widths(grid: Sequence[Sequence[str]], total: int, padding: int = 0, widest: int = 40) -> tuple[int, ...]:
    """Characters for each column of `grid`: whole words where they fit, and no more than `total` in all."""
    columns = list(zip(*grid, strict=True))
    natural = [padding + max(1, *(min(len(cell), widest) for cell in column)) for column in columns]
    if sum(natural) <= total:
        return tuple(natural)
    least = [padding + max(1, *(len(word) for cell in column for word in (cell.split() or [""]))) for column in columns]
    widths = [min(one, most) for one, most in zip(least, natural, strict=True)]
    while sum(widths) > total and max(widths) > 1:
        widths[widths.index(max(widths))] -= 1
    while sum(widths) < total:
        wanting = [most - one for one, most in zip(widths, natural, strict=True)]
        widths[wanting.index(max(wanting))] += 1
    return tuple(widths)
