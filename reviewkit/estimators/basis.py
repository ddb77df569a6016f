"""A well-conditioned basis of a design matrix, and the columns that add nothing to it."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]

BLOCK = 4096
"""Rows worked on at once, so that a block of a usual design stays in cache."""
_SAFE_PIVOT = 1e-6  # above this share of its variance a column is told from the others by its cross-products
_COLLINEAR = 1e-10  # below this share of its norm a column is a combination of those before it


@dataclass(frozen=True, slots=True)
class Basis:
    """Columns z = x @ map that span the same space, centred and scaled; fits are made on z, told in x."""

    z: Array
    """(n, r), in the order of the kept columns; stored column by column."""
    map: Array
    """(r, r): coefficients on x are map @ coefficients on z."""
    kept: tuple[int, ...]
    """Places of the kept columns in the design matrix."""
    collinear: tuple[tuple[int, tuple[int, ...]], ...]
    """Each column left out, with the kept columns that it is a combination of."""


def well_conditioned(x: Array) -> Basis:
    """Centre and scale the columns of x (n, k), whose first is the constant, and leave out collinear ones.

    Cross-products tell columns apart down to half the digits; where a column comes close to that, an orthogonal
    factorisation decides, and its factor makes the basis.
    """
    n, k = x.shape
    centre = x.mean(axis=0)
    centre[0] = 0.0
    z, scale = _centred(x, centre)
    flat = scale <= _COLLINEAR * np.abs(centre)
    flat[0] = False
    scale[flat] = 1.0
    z /= scale
    gram = z.T @ z / n
    pivots = _pivots(gram)
    if not flat.any() and pivots.min() > _SAFE_PIVOT:
        return Basis(z, _map(centre, np.diag(1 / scale)), tuple(range(k)), ())
    return _factored(z, centre, scale, flat)


def _centred(x: Array, centre: Array) -> tuple[Array, Array]:
    """The columns less their centres, each in one piece of memory, and the root of their mean square."""
    z = np.empty(x.shape, order="F")
    for start in range(0, len(x), BLOCK):
        rows = slice(start, start + BLOCK)
        for column, middle in enumerate(centre):
            np.subtract(x[rows, column], middle, out=z[rows, column])
    return z, np.asarray(np.sqrt(np.einsum("ij,ij->j", z, z) / len(x)))


def _pivots(gram: Array) -> Array:
    """What is left of each column's variance after those before it, by elimination; (k,)."""
    left = gram.copy()
    pivots = np.zeros(len(left))
    for place in range(len(left)):
        pivots[place] = left[place, place]
        if pivots[place] <= 0:
            return pivots
        left[place:, place:] -= np.outer(left[place:, place], left[place, place:]) / pivots[place]
        left[place, place] = 0.0
    return pivots


def _map(centre: Array, mixing: Array) -> Array:
    """Coefficients on x from those on z = (x - centre) @ mixing; the constant takes the centring back."""
    back = mixing.copy()
    back[0] -= centre @ mixing
    return back


def _factored(z: Array, centre: Array, scale: Array, flat: npt.NDArray[np.bool_]) -> Basis:
    """The basis by an orthogonal factorisation, with collinear columns named and left out."""
    r = _triangle(z)
    norm = np.linalg.norm(r, axis=0)
    kept: list[int] = []
    out: list[int] = []
    for place in range(z.shape[1]):
        left = r[:, place]
        if kept:
            q = _orthogonal(r[:, kept])
            left = left - q @ (q.T @ left)
        small = flat[place] or np.linalg.norm(left) <= _COLLINEAR * max(norm[place], 1e-300)
        (out if small else kept).append(place)
    collinear = tuple((place, (0,) if flat[place] else _partners(r, kept, place)) for place in out)
    mixing = np.linalg.inv(_triangle(r[:, kept])) * np.sqrt(len(z))
    back = np.diag(1 / scale[kept]) @ mixing
    return Basis(np.asfortranarray(z[:, kept] @ mixing), _map(centre[kept], back), tuple(kept), collinear)


def _triangle(x: Array) -> Array:
    return np.asarray(np.linalg.qr(x, mode="r"), dtype=float)


def _orthogonal(x: Array) -> Array:
    return np.asarray(np.linalg.qr(x)[0], dtype=float)


def _partners(r: Array, kept: list[int], place: int) -> tuple[int, ...]:
    """The kept columns that make up a collinear one: those with a share in it that is not rounding."""
    share = np.linalg.lstsq(r[:, kept], r[:, place], rcond=None)[0]
    return tuple(each for each, part in zip(kept, share, strict=True) if abs(part) > 1e-8)
