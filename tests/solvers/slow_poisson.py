"""Slow and obvious answers to Poisson problems: dense, exact in fractions, or with eighty digits."""

from decimal import Decimal, localcontext
from fractions import Fraction

import numpy as np
from hypothesis import strategies as st

from dec.calculus.complex import Complex

DIGITS = 60


def dense_laplacian(K, conductance, dtype=np.float64):
    L = np.zeros((K.counts[0], K.counts[0]), dtype)
    for a, b, c in zip(K.tail, K.head, conductance, strict=True):
        if a != b:
            L[a, a] += c
            L[b, b] += c
            L[a, b] -= c
            L[b, a] -= c
    return L


def dense_solution(K, source, conductance, fixed=None):
    """By pseudo-inverse without, by elimination with fixed potentials; mean zero in each component without one."""
    L = dense_laplacian(K, conductance)
    if not fixed:
        return np.linalg.pinv(L, hermitian=True) @ source
    u = np.zeros(source.shape)
    held = np.array(sorted(fixed))
    u[held] = np.array([fixed[v] for v in held]).reshape(-1, *[1] * (source.ndim - 1))
    for part in range(K.n_components):
        members = np.flatnonzero(K.component_labels == part)
        free = np.setdiff1d(members, held)
        inner = L[np.ix_(free, free)]
        right = source[free] - L[np.ix_(free, held)] @ u[held]
        if len(free) == len(members):
            u[free] = np.linalg.pinv(inner, hermitian=True) @ right
        else:
            u[free] = np.linalg.solve(inner, right)
    return u


def net_inflow(K, flow):
    total = np.zeros((K.counts[0], *flow.shape[1:]), dtype=flow.dtype)
    np.add.at(total, K.head, flow)
    np.subtract.at(total, K.tail, flow)
    return total


def fractions(values):
    return [Fraction(value) for value in np.asarray(values).tolist()]


def exact_residual(K, source, conductance, potential, is_fixed):
    """Source minus L u in fractions, zero where fixed."""
    left, u = list(source), fractions(potential)
    for a, b, c in zip(K.tail.tolist(), K.head.tolist(), fractions(conductance), strict=True):
        flow = c * (u[a] - u[b])
        left[a] -= flow
        left[b] += flow
    return [Fraction(0) if fixed else r for r, fixed in zip(left, is_fixed, strict=True)]


def exact_sources(source, labels, has_outlet):
    """Each component's surplus spread evenly, in fractions, where nothing is fixed."""
    values = fractions(source)
    for part in np.flatnonzero(~np.asarray(has_outlet)):
        members = np.flatnonzero(labels == part)
        share = sum((values[v] for v in members), Fraction(0)) / len(members)
        for v in members:
            values[v] -= share
    return values


def exact_solution(K, source, conductance, fixed):
    """Potentials in fractions, by elimination; zero at the lowest vertex of a component with nothing fixed."""
    known = dict(fixed)
    held = set(K.component_labels[list(known)].tolist())
    for part in range(K.n_components):
        if part not in held:
            known[int(np.argmax(K.component_labels == part))] = Fraction(0)
    free = [v for v in range(K.counts[0]) if v not in known]
    row = {v: i for i, v in enumerate(free)}
    A = [[Fraction(0)] * len(free) + [Fraction(source[v])] for v in free]
    for a, b, c in zip(K.tail.tolist(), K.head.tolist(), fractions(conductance), strict=True):
        for here, there in ((a, b), (b, a)) if a != b else ():
            if here in row:
                A[row[here]][row[here]] += c
                if there in row:
                    A[row[here]][row[there]] -= c
                else:
                    A[row[here]][-1] += c * known[there]
    for k, pivot in enumerate(A):
        for i, other in enumerate(A):
            if i != k and other[k]:
                factor = other[k] / pivot[k]
                A[i] = [x - factor * y for x, y in zip(other, pivot, strict=True)]
    return {**known, **{v: A[i][-1] / A[i][i] for v, i in row.items()}}


def error_from_below(K, residual, conductance, is_fixed):
    """A number that the error of the potentials in the energy norm is never below, and very close to it.

    |u - u*| is the largest r.v / |v| over all v that are zero where fixed; v is found in long doubles, the quotient
    formed in fractions.
    """
    r = np.array([np.longdouble(float(x)) + np.longdouble(float(x - Fraction(float(x)))) for x in residual])
    v = np.zeros(len(r))
    L = dense_laplacian(K, conductance, np.longdouble)
    for part in range(K.n_components):
        members = np.flatnonzero(K.component_labels == part)
        free = members[~is_fixed[members]]
        free = free[1:] if len(free) == len(members) else free
        if len(free):
            v[free] = _solved(L[np.ix_(free, free)], r[free]).astype(np.float64)
    exact = fractions(v)
    work = sum((a * b for a, b in zip(residual, exact, strict=True)), Fraction(0))
    size = sum(
        (c * (exact[b] - exact[a]) ** 2 for a, b, c in zip(K.tail, K.head, fractions(conductance), strict=True)),
        Fraction(0),
    )
    return root(work**2 / size) if size else 0.0


def root(square):
    """The root of a fraction, rounded down."""
    if not square:
        return 0.0
    with localcontext() as context:
        context.prec = DIGITS
        value = (Decimal(square.numerator) / Decimal(square.denominator)).sqrt()
    result = float(value)
    return result if Decimal(result) <= value else float(np.nextafter(result, 0.0))


def _solved(A, b):
    """Cholesky in long doubles."""
    L, n = A.copy(), len(b)
    for k in range(n):
        L[k, k] = np.sqrt(L[k, k])
        L[k + 1 :, k] /= L[k, k]
        L[k + 1 :, k + 1 :] -= np.multiply.outer(L[k + 1 :, k], L[k + 1 :, k])
    x = b.copy()
    for k in range(n):
        x[k] /= L[k, k]
        x[k + 1 :] -= L[k + 1 :, k] * x[k]
    for k in range(n - 1, -1, -1):
        x[k] = (x[k] - L[k + 1 :, k] @ x[k + 1 :]) / L[k, k]
    return x


def decimal_flow(drop, c, n):
    """(c |drop|)^(1/n) with the sign of the drop."""
    size = (c * abs(drop)) ** (1 / n) if drop else Decimal(0)
    return size if drop > 0 else -size


def fenchel_gaps(K, potential, flow, conductance, exponent):
    """Content of the flow plus co-content of the drop minus their product, of every edge; sixty digits."""
    gaps = []
    with localcontext() as context:
        context.prec = DIGITS
        for e, (a, b) in enumerate(zip(K.tail, K.head, strict=True)):
            drop = Decimal(float(potential[a])) - Decimal(float(potential[b]))
            c, n, f = Decimal(float(conductance[e])), Decimal(float(exponent[e])), Decimal(float(flow[e]))
            content = abs(f) ** (n + 1) / ((n + 1) * c) if f else Decimal(0)
            q = abs(decimal_flow(drop, c, n))
            co_content = n / (n + 1) * q ** (n + 1) / c if q else Decimal(0)
            gaps.append(content + co_content - f * drop)
    return gaps


@st.composite
def multigraphs(draw, most=12, connected=False):
    """Networks with parallel edges, self-loops, several components and isolated vertices, edges turned anyhow."""
    n = draw(st.integers(1, most))
    ends = st.tuples(st.integers(0, n - 1), st.integers(0, n - 1))
    pairs = draw(st.lists(ends, max_size=3 * most))
    if connected:
        pairs += [(v - 1, v) if draw(st.booleans()) else (v, v - 1) for v in range(1, n)]
    tail = np.array([a for a, _ in pairs], dtype=np.int64)
    head = np.array([b for _, b in pairs], dtype=np.int64)
    return Complex.from_edges(tail, head, n)


def random_network(rng, most, decades, connected=True):
    """A network of up to so many vertices, with conductances spread over 10**-decades .. 10**decades."""
    n = int(rng.integers(2, most + 1))
    m = int(rng.integers(n, 3 * n + 1))
    tail, head = rng.integers(0, n, m), rng.integers(0, n, m)
    if connected:
        tail[: n - 1], head[: n - 1] = np.arange(n - 1), np.arange(1, n)
    return Complex.from_edges(tail, head, n), 10 ** rng.uniform(-decades, decades, m)
