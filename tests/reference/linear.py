"""Small dense linear algebra with row scaling and partial pivoting, real and complex."""

from __future__ import annotations

from .compiled import jit


@jit
def factor(a, scale, pivots):
    """LU-factor ``a`` in place after dividing each row by its largest entry; False when singular."""
    n = a.shape[0]
    for i in range(n):
        top = 0.0
        for j in range(n):
            top = max(top, abs(a[i, j]))
        if not (top > 0.0 and top < 1e300):
            return False
        scale[i] = 1.0 / top
        for j in range(n):
            a[i, j] *= scale[i]
    for k in range(n):
        best = k
        for i in range(k + 1, n):
            if abs(a[i, k]) > abs(a[best, k]):
                best = i
        pivots[k] = best
        if abs(a[best, k]) == 0.0:
            return False
        if best != k:
            for j in range(n):
                a[k, j], a[best, j] = a[best, j], a[k, j]
        inverse = 1.0 / a[k, k]
        for i in range(k + 1, n):
            if a[i, k] != 0.0:
                ratio = a[i, k] * inverse
                a[i, k] = ratio
                for j in range(k + 1, n):
                    a[i, j] -= ratio * a[k, j]
    return True


@jit
def substitute(lu, scale, pivots, b):
    """Solve in place with the factors of ``factor``."""
    n = lu.shape[0]
    for i in range(n):
        b[i] *= scale[i]
    for k in range(n):
        p = pivots[k]
        if p != k:
            b[k], b[p] = b[p], b[k]
    for i in range(1, n):
        total = b[i]
        for j in range(i):
            total -= lu[i, j] * b[j]
        b[i] = total
    for i in range(n - 1, -1, -1):
        total = b[i]
        for j in range(i + 1, n):
            total -= lu[i, j] * b[j]
        b[i] = total / lu[i, i]
