"""Cholesky factor and forward substitution, compiled: the two places where the kernel's time goes.

Ours rather than LAPACK's because a call per tile costs as much as the tile's work, and because results must not
depend on how many right-hand sides go through together or on how many threads a library takes.
"""

from __future__ import annotations

import math

import numpy as np

from texture.compiling import compiled

__all__ = ["REDUNDANT", "factor", "forward"]

# A station whose variance given the stations before it is below this part of its own adds nothing but rounding
# error; it is left out of that neighbourhood and counted. 1e-12 keeps condition numbers to what 1e-8 agreement allows.
REDUNDANT = 1e-12


@compiled
def factor(u: np.ndarray, own: np.ndarray, dropped: np.ndarray) -> int:
    """Cholesky factor U (K = U'U) in place of the upper triangle of `u` (m, m), m a multiple of 4.

    `own` (m,) holds the diagonal as it was. Redundant stations get a unit row and are marked in `dropped`; returns
    how many. Works through four rows at a time, so that the trailing update makes four multiply-adds per load and
    store.
    """
    m = u.shape[0]
    redundant = 0
    for a in range(0, m, 4):
        for r in range(a, a + 4):
            row = u[r, r:]
            if not row[0] > REDUNDANT * own[r]:
                dropped[r] = True
                redundant += 1
                for j in range(row.size):
                    row[j] = 0.0
                row[0] = 1.0
                continue
            dropped[r] = False
            root = math.sqrt(row[0])
            inverse = 1.0 / root
            for j in range(row.size):
                row[j] *= inverse
            row[0] = root
            for i in range(r + 1, a + 4):
                f = u[r, i]
                target, source = u[i, i:], u[r, i:]
                for j in range(target.size):
                    target[j] -= f * source[j]
        for i in range(a + 4, m):
            f0, f1, f2, f3 = u[a, i], u[a + 1, i], u[a + 2, i], u[a + 3, i]
            target, s0, s1, s2, s3 = u[i, i:], u[a, i:], u[a + 1, i:], u[a + 2, i:], u[a + 3, i:]
            for j in range(target.size):
                target[j] -= (f0 * s0[j] + f1 * s1[j]) + (f2 * s2[j] + f3 * s3[j])
    # A redundant station's column in the rows above it would still carry its covariance.
    if redundant > 0:
        for r in range(m):
            if dropped[r]:
                for i in range(r):
                    u[i, r] = 0.0
    return redundant


@compiled
def forward(u: np.ndarray, w: np.ndarray) -> None:
    """Solve U'w = w in place; w is (m, lanes), one column per right-hand side."""
    m, lanes = w.shape
    for a in range(0, m, 4):
        a0, a1, a2, a3 = w[a], w[a + 1], w[a + 2], w[a + 3]
        for b in range(0, a, 4):
            b0, b1, b2, b3 = w[b], w[b + 1], w[b + 2], w[b + 3]
            u00, u01, u02, u03 = u[b, a], u[b, a + 1], u[b, a + 2], u[b, a + 3]
            u10, u11, u12, u13 = u[b + 1, a], u[b + 1, a + 1], u[b + 1, a + 2], u[b + 1, a + 3]
            u20, u21, u22, u23 = u[b + 2, a], u[b + 2, a + 1], u[b + 2, a + 2], u[b + 2, a + 3]
            u30, u31, u32, u33 = u[b + 3, a], u[b + 3, a + 1], u[b + 3, a + 2], u[b + 3, a + 3]
            for c in range(lanes):
                x0, x1, x2, x3 = b0[c], b1[c], b2[c], b3[c]
                a0[c] -= (u00 * x0 + u10 * x1) + (u20 * x2 + u30 * x3)
                a1[c] -= (u01 * x0 + u11 * x1) + (u21 * x2 + u31 * x3)
                a2[c] -= (u02 * x0 + u12 * x1) + (u22 * x2 + u32 * x3)
                a3[c] -= (u03 * x0 + u13 * x1) + (u23 * x2 + u33 * x3)
        i0, i1, i2, i3 = 1.0 / u[a, a], 1.0 / u[a + 1, a + 1], 1.0 / u[a + 2, a + 2], 1.0 / u[a + 3, a + 3]
        u01, u02, u03 = u[a, a + 1], u[a, a + 2], u[a, a + 3]
        u12, u13, u23 = u[a + 1, a + 2], u[a + 1, a + 3], u[a + 2, a + 3]
        for c in range(lanes):
            x0 = a0[c] * i0
            x1 = (a1[c] - u01 * x0) * i1
            x2 = (a2[c] - u02 * x0 - u12 * x1) * i2
            x3 = (a3[c] - u03 * x0 - u13 * x1 - u23 * x2) * i3
            a0[c] = x0
            a1[c] = x1
            a2[c] = x2
            a3[c] = x3
