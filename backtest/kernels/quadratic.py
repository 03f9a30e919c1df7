"""A small quadratic programme: the Newton step inside linear constraints, by a primal active set.

maximise g.d - d'Qd/2 subject to A d <= slack, in a handful of dimensions. The boundary is the normal case here
(alpha = 0 in most windows of an index), so curvature is asked for in the space the active constraints leave free.
"""

import numpy as np

from backtest.kernels.compiled import compiled, inner


@inner
def dot(a: np.ndarray, b: np.ndarray) -> float:
    """Return the inner product; loops, since a call into BLAS costs more than the sum of a few numbers."""
    total = 0.0
    for i in range(a.size):
        total += a[i] * b[i]
    return total


@compiled
def cholesky_solve(matrix: np.ndarray, right: np.ndarray) -> bool:
    """Solve matrix y = right in place of ``right`` for a positive definite matrix; return False where it is not."""
    n = right.size
    for j in range(n):
        pivot = matrix[j, j]
        for k in range(j):
            pivot -= matrix[j, k] * matrix[j, k]
        if not pivot > 1e-13 * (abs(matrix[j, j]) + 1e-300):
            return False
        matrix[j, j] = np.sqrt(pivot)
        for i in range(j + 1, n):
            total = matrix[i, j]
            for k in range(j):
                total -= matrix[i, k] * matrix[j, k]
            matrix[i, j] = total / matrix[j, j]
    for i in range(n):
        for k in range(i):
            right[i] -= matrix[i, k] * right[k]
        right[i] /= matrix[i, i]
    for i in range(n - 1, -1, -1):
        for k in range(i + 1, n):
            right[i] -= matrix[k, i] * right[k]
        right[i] /= matrix[i, i]
    return True


@compiled
def null_basis(A: np.ndarray, active: np.ndarray) -> np.ndarray:
    """Return a basis Z (n, free) of the directions that keep the active rows of A unchanged, by elimination."""
    n = A.shape[1]
    rows = np.empty((A.shape[0], n))
    pivots = np.empty(A.shape[0], np.int64)
    used = np.zeros(n, np.bool_)
    m = 0
    for i in range(A.shape[0]):
        if not active[i]:
            continue
        rows[m] = A[i]
        for k in range(m):
            rows[m] -= rows[m, pivots[k]] * rows[k]
        best = np.argmax(np.abs(rows[m]))
        if abs(rows[m, best]) < 1e-12:
            continue
        rows[m] /= rows[m, best]
        for k in range(m):
            rows[k] -= rows[k, best] * rows[m]
        pivots[m], used[best] = best, True
        m += 1
    Z = np.zeros((n, n - m))
    column = 0
    for j in range(n):
        if used[j]:
            continue
        Z[j, column] = 1.0
        for k in range(m):
            Z[pivots[k], column] = -rows[k, j]
        column += 1
    return Z


@inner
def reduced_step(Q: np.ndarray, gradient: np.ndarray, Z: np.ndarray) -> tuple[np.ndarray, bool]:
    """Return the step of the reduced problem and whether curvature had to be added to make it well posed."""
    n, free = Z.shape
    right, reduced, QZ = np.empty(free), np.empty((free, free)), np.empty((free, n))
    for a in range(free):
        right[a] = dot(Z[:, a], gradient)
        for i in range(n):
            QZ[a, i] = dot(Q[i], Z[:, a])
    for a in range(free):
        for b in range(free):
            reduced[a, b] = dot(QZ[a], Z[:, b])
    damped = False
    ridge = 0.0
    for _ in range(40):
        work = reduced.copy()
        solution = right.copy()
        for j in range(free):
            work[j, j] += ridge
        if cholesky_solve(work, solution):
            break
        damped = True
        ridge = max(4.0 * ridge, 1e-4 * (1e-6 + np.max(np.abs(reduced))))
    step = np.empty(n)
    for i in range(n):
        step[i] = dot(Z[i], solution)
    return step, damped


@inner
def multipliers(A: np.ndarray, active: np.ndarray, force: np.ndarray) -> np.ndarray:
    """Return the multipliers of the active rows for a ``force`` (gradient) that they hold, zero for the others."""
    index = np.flatnonzero(active)
    out = np.zeros(A.shape[0])
    m = index.size
    if m == 0:
        return out
    gram, right = np.empty((m, m)), np.empty(m)
    for i in range(m):
        right[i] = dot(A[index[i]], force)
        for j in range(m):
            gram[i, j] = dot(A[index[i]], A[index[j]]) + (1e-10 if i == j else 0.0)
    if cholesky_solve(gram, right):
        for i in range(m):
            out[index[i]] = right[i]
    return out


@compiled
def constrained_step(Q: np.ndarray, g: np.ndarray, A: np.ndarray, slack: np.ndarray) -> tuple[np.ndarray, bool]:
    """Return d maximising g.d - d'Qd/2 with A d <= slack (slack >= 0), and whether curvature was added.

    The plain Newton step is taken where it stays inside. Else the search starts at d = 0 with the constraints that hold
    with equality and ends where no multiplier asks to be released.
    """
    n = g.size
    d = g.copy()
    if np.min(slack) > 1e-13 and cholesky_solve(Q.copy(), d):
        inside = True
        for i in range(slack.size):
            inside = inside and dot(A[i], d) <= slack[i]
        if inside:
            return d, False
    d[:] = 0.0
    active = slack <= 1e-13
    damped = False
    force = g.copy()
    for _ in range(30):
        p, added = reduced_step(Q, force, null_basis(A, active))
        damped = damped or added
        length, blocking = 1.0, -1
        for i in range(slack.size):
            if active[i]:
                continue
            rate = dot(A[i], p)
            room = max(slack[i] - dot(A[i], d), 0.0)
            if rate > 1e-15 and room < length * rate:
                length, blocking = room / rate, i
        d += length * p
        for i in range(n):
            force[i] = g[i] - dot(Q[i], d)
        if blocking >= 0:
            active[blocking] = True
            continue
        if added:
            break
        held = multipliers(A, active, force)
        worst = np.argmin(held)
        if held[worst] >= -1e-10:
            break
        active[worst] = False
    return d, damped
