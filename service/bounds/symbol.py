"""Continuity by the symbol: constant coefficients, functions that vanish all round and extend by zero."""

import math

import numpy as np

from service.bounds.rounding import up

DIRECTIONS = 1 << 14
"""Pieces into which half the circle of directions is cut."""


def symbol_bound(diffusion: np.ndarray, velocity: np.ndarray, reaction: float, weight: float) -> float:
    """An upper bound of sup_k |k.Kk + c + i b.k| / (k.k + w0) over k in the plane, w0 > 0.

    diffusion, velocity : (2, 2) and (2,), in coordinates in which the norm's gradient has weight 1.

    With k = r e, t = r^2: ((t p + c)^2 + t q)/(t + w0)^2, p = e.Ke and q = (b.e)^2, is a quadratic polynomial in
    z = 1/(t + w0). p and q are p0 + p1 cos(2 phi - p2): on a piece of the circle they are within the values at its
    ends, up to the second difference.
    """
    step = math.pi / DIRECTIONS
    phi = np.arange(DIRECTIONS + 1) * step
    e = np.stack([np.cos(phi), np.sin(phi)])
    p = np.einsum("in,ij,jn->n", e, diffusion, e)
    q = (velocity @ e) ** 2
    bend = step**2
    low, high = np.minimum(p[1:], p[:-1]), np.maximum(p[1:], p[:-1])
    spread_p = bend * float(np.linalg.norm(diffusion))
    most = np.maximum(q[1:], q[:-1]) + bend * float(velocity @ velocity)
    best = 0.0
    for value in (low - spread_p, high + spread_p):
        # (1 - w z)^2 p^2 + 2 p c (1 - w z) z + c^2 z^2 + q (1 - w z) z on 0 <= z <= 1/w.
        a = value**2 * weight**2 - (2 * value * reaction + most) * weight + reaction**2
        b = -2 * value**2 * weight + 2 * value * reaction + most
        ends = [value**2, a / weight**2 + b / weight + value**2]
        vertex = np.where(a < 0, np.clip(-b / np.where(a < 0, 2 * a, -1.0), 0.0, 1 / weight), 0.0)
        ends.append(a * vertex**2 + b * vertex + value**2)
        best = max(best, *(float(np.max(end)) for end in ends))
    return up(math.sqrt(best) * (1 + 1e-12), 16)
