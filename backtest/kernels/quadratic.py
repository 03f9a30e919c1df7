"""A small quadratic programme: the Newton step inside linear constraints, by a primal active set.

maximise g.d - d'Qd/2 subject to A d <= slack, in a handful of dimensions. The boundary is the normal case here
(alpha = 0 in most windows of an index), so curvature is asked for in the space the active constraints leave free.

Everything stands in rows of one array, the sheet: kernels that allocate nothing compile faster and count no references.
"""

import numpy as np

from backtest.kernels.compiled import in_place, inner
from backtest.kernels.parameters import COUNT

LINES = 11
"""Constraints."""
Row = int | np.int64
Q, A = np.int64(0), np.int64(COUNT)
G, SLACK, STEP = A + LINES, A + LINES + 1, A + LINES + 2
"""Rows of the sheet that pose the programme, and its answer; not plain constants, for each of which a kernel handed one
would be compiled anew."""
MATRIX, RIGHT = STEP + 1, STEP + 1 + LINES
"""Rows of a system to be solved."""
_ACTIVE, _FORCE, _MOVE, _INDEX, _BASIS = (RIGHT + 1 + i for i in range(5))
_REDUCED = _BASIS + COUNT
_ROWS = _REDUCED + COUNT
"""Rows for scratch: a flag for each active constraint, what still pulls at the step, a direction, columns or
constraints by number; directions left free, curvature along these."""


def new_sheet() -> np.ndarray:
    """Return an empty sheet."""
    return np.zeros((_ROWS, LINES))


def solve(curvature: np.ndarray, gradient: np.ndarray, rows: np.ndarray, slack: np.ndarray) -> tuple[np.ndarray, bool]:
    """Return d maximising gradient.d - d'curvature d/2 with rows d <= slack >= 0, and whether curvature was added."""
    sheet, n = new_sheet(), len(gradient)
    sheet[Q : Q + n, :n], sheet[G, :n], sheet[SLACK] = curvature, gradient, 1.0
    sheet[A : A + len(slack), :n], sheet[SLACK, : len(slack)] = rows, slack
    damped = constrained_step(sheet, n)
    return sheet[STEP, :n].copy(), damped


@inner
def dot(w: np.ndarray, a: Row, b: Row, n: Row) -> float:
    """Return the inner product of two rows; loops, since a call into BLAS costs more than the sum of a few numbers."""
    total = 0.0
    for i in range(n):
        total += w[a, i] * w[b, i]
    return total


@in_place
def cholesky_solve(w: np.ndarray, n: Row) -> bool:
    """Solve MATRIX y = RIGHT in place of RIGHT for a positive definite matrix (lower triangle); False where it is not.

    The matrix is overwritten.
    """
    for j in range(n):
        pivot = w[MATRIX + j, j]
        for k in range(j):
            pivot -= w[MATRIX + j, k] * w[MATRIX + j, k]
        if not pivot > 1e-13 * (abs(w[MATRIX + j, j]) + 1e-300):
            return False
        w[MATRIX + j, j] = np.sqrt(pivot)
        for i in range(j + 1, n):
            total = w[MATRIX + i, j]
            for k in range(j):
                total -= w[MATRIX + i, k] * w[MATRIX + j, k]
            w[MATRIX + i, j] = total / w[MATRIX + j, j]
    for i in range(n):
        for k in range(i):
            w[RIGHT, i] -= w[MATRIX + i, k] * w[RIGHT, k]
        w[RIGHT, i] /= w[MATRIX + i, i]
    for i in range(n - 1, -1, -1):
        for k in range(i + 1, n):
            w[RIGHT, i] -= w[MATRIX + k, i] * w[RIGHT, k]
        w[RIGHT, i] /= w[MATRIX + i, i]
    return True


@inner
def null_basis(w: np.ndarray, n: int) -> Row:
    """Fill the directions that keep the active constraints unchanged, by elimination; return how many there are."""
    m = np.int64(0)
    for line in range(LINES):
        if w[_ACTIVE, line] == 0.0:
            continue
        row, best = MATRIX + m, 0
        for i in range(n):
            w[row, i] = w[A + line, i]
        for k in range(m):
            factor = w[row, int(w[_INDEX, k])]
            for i in range(n):
                w[row, i] -= factor * w[MATRIX + k, i]
        for i in range(n):
            best = i if abs(w[row, i]) > abs(w[row, best]) else best
        if abs(w[row, best]) < 1e-12:
            continue
        pivot = w[row, best]
        for i in range(n):
            w[row, i] /= pivot
        for k in range(m):
            factor = w[MATRIX + k, best]
            for i in range(n):
                w[MATRIX + k, i] -= factor * w[row, i]
        w[_INDEX, m] = best
        m += 1
    return unit_directions(w, n, m)


@inner
def unit_directions(w: np.ndarray, n: int, m: Row) -> Row:
    """Fill a direction for each parameter that is not the pivot of one of ``m`` eliminated rows."""
    free = 0
    for j in range(n):
        pivot = False
        for k in range(m):
            pivot = pivot or w[_INDEX, k] == j
        if pivot:
            continue
        for i in range(n):
            w[_BASIS + free, i] = 1.0 if i == j else 0.0
        for k in range(m):
            w[_BASIS + free, int(w[_INDEX, k])] = -w[MATRIX + k, j]
        free += 1
    return free


@inner
def reduced_step(w: np.ndarray, n: int, free: Row) -> bool:
    """Fill the move that the reduced problem asks for; tell whether curvature had to be added to make it well posed."""
    most = 0.0
    for a in range(free):
        for i in range(n):
            w[_MOVE, i] = dot(w, Q + i, _BASIS + a, n)
        for b in range(free):
            w[_REDUCED + a, b] = dot(w, _MOVE, _BASIS + b, n)
            most = max(most, abs(w[_REDUCED + a, b]))
    ridge, damped = 0.0, False
    for _ in range(40):
        for a in range(free):
            w[RIGHT, a] = dot(w, _BASIS + a, _FORCE, n)
            for b in range(free):
                w[MATRIX + a, b] = w[_REDUCED + a, b] + (ridge if a == b else 0.0)
        if cholesky_solve(w, free):
            break
        damped = True
        ridge = max(4.0 * ridge, 1e-4 * (1e-6 + most))
    for i in range(n):
        w[_MOVE, i] = 0.0
        for a in range(free):
            w[_MOVE, i] += w[_BASIS + a, i] * w[RIGHT, a]
    return damped


@inner
def weakest(w: np.ndarray, n: int) -> int:
    """Return the active constraint whose multiplier is furthest below zero, so that it asks to be released, or -1."""
    m = np.int64(0)
    for line in range(LINES):
        if w[_ACTIVE, line] != 0.0:
            w[_INDEX, m] = line
            m += 1
    for i in range(m):
        first = A + int(w[_INDEX, i])
        w[RIGHT, i] = dot(w, first, _FORCE, n)
        for j in range(m):
            w[MATRIX + i, j] = dot(w, first, A + int(w[_INDEX, j]), n) + (1e-10 if i == j else 0.0)
    if not cholesky_solve(w, m):
        return -1
    worst, lowest = -1, -1e-10
    for i in range(m):
        if w[RIGHT, i] < lowest:
            worst, lowest = int(w[_INDEX, i]), w[RIGHT, i]
    return worst


@inner
def plain_step(w: np.ndarray, n: int) -> bool:
    """Fill the Newton step; tell whether it exists and stays inside, no constraint holding with equality before it."""
    for line in range(LINES):
        if not w[SLACK, line] > 1e-13:
            return False
    for i in range(n):
        w[RIGHT, i] = w[G, i]
        for j in range(n):
            w[MATRIX + i, j] = w[Q + i, j]
    if not cholesky_solve(w, n):
        return False
    for i in range(n):
        w[STEP, i] = w[RIGHT, i]
    inside = True
    for line in range(LINES):
        inside = inside and dot(w, A + line, STEP, n) <= w[SLACK, line]
    return inside


@inner
def advance(w: np.ndarray, n: int) -> int:
    """Add the move to the step as far as the constraints allow; return the one that blocks it, or -1."""
    length, blocking = 1.0, -1
    for line in range(LINES):
        if w[_ACTIVE, line] != 0.0:
            continue
        rate = dot(w, A + line, _MOVE, n)
        room = max(w[SLACK, line] - dot(w, A + line, STEP, n), 0.0)
        if rate > 1e-15 and room < length * rate:
            length, blocking = room / rate, line
    for i in range(n):
        w[STEP, i] += length * w[_MOVE, i]
    for i in range(n):
        w[_FORCE, i] = w[G, i] - dot(w, Q + i, STEP, n)
    return blocking


@in_place
def constrained_step(w: np.ndarray, n: int) -> bool:
    """Fill the step maximising g.d - d'Qd/2 in ``n`` dimensions, A d <= slack; tell whether curvature was added.

    The plain Newton step is taken where it stays inside. Else the search starts at d = 0 with the constraints that hold
    with equality and ends where no multiplier asks to be released.
    """
    if plain_step(w, n):
        return False
    for line in range(LINES):
        w[_ACTIVE, line] = 1.0 if w[SLACK, line] <= 1e-13 else 0.0
    for i in range(n):
        w[STEP, i], w[_FORCE, i] = 0.0, w[G, i]
    damped = False
    for _ in range(30):
        added = reduced_step(w, n, null_basis(w, n))
        damped = damped or added
        blocking = advance(w, n)
        if blocking >= 0:
            w[_ACTIVE, blocking] = 1.0
            continue
        worst = -1 if added else weakest(w, n)
        if worst < 0:
            break
        w[_ACTIVE, worst] = 0.0
    return damped
