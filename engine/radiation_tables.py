"""Tables of the baffled-source impedance in the Zernike basis, built once and kept.

With F(s) = J_mu(s) J_nu(s)/s^2, mu = n+2i+1, nu = n+2j+1 and x = k b,

    A_ij(x) = int_0^1 F(x sqrt(1-u^2)) du        B_ij(x) = int_0^inf F(sqrt(x^2+w^2)) dw

are even entire functions of x. Kept are their Chebyshev coefficients in x^2 over [0, x_max^2], A divided by x^(2n)
first, both with the signs (-1)^(i+j) of the Hankel transforms folded in. Polynomials of high degree feel x little:
their higher coefficients vanish, and the tables leave them out.
"""

import threading
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from scipy.special import j0, j1

LADDER = (4.0, 8.0, 16.0, 32.0, 64.0, 128.0)     # largest k b of the kept tables; beyond, multiples of 64
ROUNDING = 16                         # tables are kept for multiples of this many polynomials
CORE = 64                             # polynomials, up to k b = 64, that may need every term; fewer are a sub-block
OUTER_TERMS = 16                      # terms that the polynomials beyond the core need
TRIM = 1e-12                          # of sqrt(B_ii B_jj): coefficients below it are left out
LARGEST_BATCH = 8192                  # points evaluated at once


@dataclass(frozen=True)
class Tables:
    """Chebyshev coefficients of A/x^(2n) and B for one circumferential order.

    blocks: tuple of (first, last, stack); stack (size, 2 (last-first), size) holds the coefficients first ... last-1 of
    A, then those of B, of the leading `size` polynomials; beyond them they vanish.
    """

    order: int
    x_max: float              # largest k b the tables hold for
    n_polynomials: int
    n_terms: int              # Chebyshev terms, K
    nodes: np.ndarray         # (K,) Chebyshev points of x^2, ascending
    blocks: tuple

    def dense(self):
        """Both coefficient tables in full, (K, J, J) each."""
        full = np.zeros((2, self.n_terms, self.n_polynomials, self.n_polynomials))
        for first, last, stack in self.blocks:
            size = len(stack)
            full[:, first:last, :size, :size] = stack.reshape(size, 2, last - first, size).transpose(1, 2, 0, 3)
        return full[0], full[1]


def tables(x_max, n_polynomials, order=0):
    """The kept tables that reach x_max, built at the first call; any thread may call it.

    Parameters: x_max, largest k b wanted; n_polynomials, J; order, circumferential order n.
    Returns: Tables, its J rounded up to a multiple of 16.
    """
    top, J = table_range(x_max), -(-int(n_polynomials) // ROUNDING) * ROUNDING
    return kept(("trimmed", top, order, J), lambda: _trimmed(top, J, order))


def prepare(x_max, n_polynomials, order=0):
    """Build the tables that x_max and n_polynomials need, so that later calls find them; for a background thread."""
    tables(x_max, n_polynomials, order)


def table_range(x_max):
    """Largest k b of the tables that serve x_max."""
    if not 0.0 <= x_max <= 1024.0:
        raise ValueError(f"k b is {x_max:g}; tables exist from 0 to 1024")
    return next((top for top in LADDER if x_max <= top), 64.0 * np.ceil(x_max / 64.0))


def n_terms(amplitude):
    """Chebyshev terms for a function like exp(i amplitude cos t) to some 1e-14 (J_k(amplitude) beyond)."""
    return int(np.ceil(amplitude + 6.5 * amplitude ** (1.0 / 3.0) + 6.0))


def chebyshev_nodes(K):
    """First-kind points on [0, 1], ascending, and the (K, K) matrix from values there to coefficients."""
    t = (np.arange(K)[::-1] + 0.5) * np.pi / K
    matrix = 2.0 / K * np.cos(np.arange(K)[:, None] * t)
    matrix[0] *= 0.5
    return 0.5 * (1.0 + np.cos(t)), matrix


def chebyshev_matrix(xi, K):
    """T_k(2 xi - 1) for xi in [0, 1]: xi.shape + (K,)."""
    t = np.arccos(np.clip(2.0 * np.asarray(xi, dtype=float) - 1.0, -1.0, 1.0))
    return np.cos(t[..., None] * np.arange(K))


def static_table(n_polynomials, order=0):
    """B(0) with the signs folded in, (J, J): 1/[4 pi (1/4 - d^2)(h - 1/2)(h + 1/2)], d = i-j, h = n+i+j+1."""
    i = np.arange(n_polynomials)
    d, h = i[:, None] - i, i[:, None] + i + order + 1.0
    return 1.0 / (4.0 * np.pi * (0.25 - d * d) * (h - 0.5) * (h + 0.5))


def signs(n_polynomials):
    """(-1)^j, (J,)."""
    return 1.0 - 2.0 * (np.arange(n_polynomials) % 2)


def bessel_over_argument(first, n_rows, s):
    """J_mu(s)/s for mu = first, first+2, ...: (n_rows, s.size), s > 0.

    Upward recurrence where s exceeds every order, downward (Miller) elsewhere, normalised by J_0 + 2 sum J_2k = 1.
    """
    top = first + 2 * (n_rows - 1)
    rows = np.zeros((n_rows, s.size))
    upward = s >= top
    if upward.any():
        rows[:, upward] = _upward(first, n_rows, s[upward])
    low, high = 0.0, 0.5
    while low < top:
        inside = (s > low) & (s <= high) & ~upward
        if inside.any():
            rows[:, inside] = _downward(first, n_rows, s[inside], high)
        low, high = high, 2.0 * high
    return rows / s


def _upward(first, n_rows, s):
    """J_mu(s) by upward recurrence from J_0 and J_1."""
    rows = np.empty((n_rows, s.size))
    before, here, twice = j0(s), j1(s), 2.0 / s
    if first == 0:
        rows[0] = before
    for m in range(1, first + 2 * n_rows - 1):
        if m >= first and (m - first) % 2 == 0:
            rows[(m - first) // 2] = here
        before, here = here, (m * twice) * here - before
    return rows


def _downward(first, n_rows, s, high):
    """J_mu(s) for high/2 < s <= high (or 0 < s <= high) by downward recurrence; rows that vanish stay zero."""
    start = int(high + 14.0 * high ** (1.0 / 3.0) + 14.0)
    rows = np.zeros((n_rows, s.size))
    above, here, twice, total = np.zeros_like(s), np.full_like(s, 1e-200), 2.0 / s, np.zeros_like(s)
    for m in range(start, 0, -1):
        above, here = here, (m * twice) * here - above              # now of order m-1
        row, odd = divmod(m - 1 - first, 2)
        if not odd and 0 <= row < n_rows:
            rows[row] = here
        if (m - 1) % 2 == 0:
            total += here
    return rows / (2.0 * total - here)


_store, _locks, _guard = {}, {}, threading.Lock()


def kept(key, build):
    """The value stored under key, built by one thread only."""
    with _guard:
        lock = _locks.setdefault(key, threading.Lock())
    with lock:
        if key not in _store:
            _store[key] = build()
        return _store[key]


def _trimmed(top, J, order):
    """Tables of J polynomials from the full coefficients, what vanishes left out."""
    diagonal = np.sqrt(np.diag(static_table(J, order)))
    small = TRIM * diagonal[:, None] * diagonal
    blocks, K = [], n_terms(top)
    for first, (A, B) in _layers(top, J, order):
        n = min(J, A.shape[1])
        A, B = A[:, :n, :n], B[:, :n, :n]
        seen = np.maximum(np.abs(B), np.abs(A) * top ** (2 * order + 1)) > small[:n, :n]
        reach = np.where(seen.any(axis=2), np.arange(1, n + 1), 0).max(axis=1)
        reach = np.maximum.accumulate(reach[::-1])[::-1]
        sizes = np.clip(-(-reach // 8) * 8, 8, n)
        edges = np.concatenate([[0], np.flatnonzero(np.diff(sizes)) + 1, [len(sizes)]])
        for low, high in pairwise(edges.tolist()):
            m = sizes[low]
            stack = np.concatenate([A[low:high, :m, :m], B[low:high, :m, :m]]).transpose(1, 0, 2)
            blocks.append((first + low, first + high, _frozen(np.ascontiguousarray(stack))))
    return Tables(order, top, J, K, _frozen(top**2 * chebyshev_nodes(K)[0]), tuple(blocks))


def _frozen(array):
    """The array, made read-only."""
    array.setflags(write=False)
    return array


def _layers(top, J, order):
    """Full coefficients as (first term, (A, B)): all terms of a core of polynomials, preceded by few terms of all."""
    core = int(CORE * max(1.0, np.ceil(top / 64.0)))
    inner = kept(("full", top, order, core), lambda: _coefficients(top, n_terms(top), core, order))
    size = -(-J // CORE) * CORE
    if size <= core:
        return [(0, inner)]

    def build():
        outer = _coefficients(top, OUTER_TERMS, size, order)
        for whole, part in zip(outer, inner, strict=True):
            whole[:, :core, :core] = part[:OUTER_TERMS]
        return outer

    outer = kept(("full", top, order, size), build)
    return [(0, outer), (OUTER_TERMS, tuple(part[OUTER_TERMS:] for part in inner))]


def _coefficients(top, K, J, order):
    """K Chebyshev coefficients (K, J, J) of A/x^(2n) and of B, signs folded in."""
    nodes, to_coefficients = chebyshev_nodes(K)
    x = top * np.sqrt(nodes)
    A = np.tensordot(to_coefficients, _resistance(x, J, order) / x[:, None, None] ** (2 * order), axes=1)
    B = _reactance(top, K, J, order)
    S = signs(J)[:, None] * signs(J)
    B *= S
    B[0] += static_table(J, order)
    return A * S, B


def _resistance(x, J, order):
    """A at every x, (len(x), J, J), by the positive half of an even Gauss-Legendre rule."""
    A = np.empty((len(x), J, J))
    rules = {n: np.polynomial.legendre.leggauss(2 * n) for n in {_resistance_points(xi) for xi in x}}
    for i, xi in enumerate(x):
        u, weight = rules[_resistance_points(xi)]
        half = u > 0.0
        G = bessel_over_argument(order + 1, J, xi * np.sqrt(1.0 - u[half] ** 2))
        A[i] = (G * weight[half]) @ G.T
    return A


def _resistance_points(x):
    """Points on half the rule for A(x): 0.75 x + 16, rounded up to 16 so that few rules serve."""
    return -(-int(0.75 * x + 16.0) // 16) * 16


def _reactance(top, K, J, order):
    """Coefficients (K, J, J) of B(x) - B(0), signs not folded in.

    The integrand F(sqrt(x^2+w^2)) - F(w) is summed over bands of w, each twice the last; the further out, the
    smaller it is and the fewer terms in x^2 it needs. It falls like x^2/w^4: beyond the last band 4e-11 is left out.
    """
    total = np.zeros((K, J, J))
    low, high, end = 0.0, 2.0 * max(top, 8.0), 250.0 * np.sqrt(top)
    while low < end:
        swing = top**2 / (2.0 * low) if low else np.inf
        terms = int(min(K, swing + 5.0 * swing ** (1.0 / 3.0) + 4.0))
        nodes, to_coefficients = chebyshev_nodes(terms)
        change = np.zeros((terms, J, J))
        for w, weight in _panels(low, high):
            for i, s in enumerate(np.sqrt(top**2 * nodes[:, None] + w**2)):
                G = bessel_over_argument(order + 1, J, s)
                change[i] += (G * weight) @ G.T
            G = bessel_over_argument(order + 1, J, w)
            change -= (G * weight) @ G.T
        total[:terms] += np.tensordot(to_coefficients, change, axes=1)
        low, high = high, 2.0 * high
    return total


def _panels(low, high):
    """Ten Gauss-Legendre points per panel of length pi or less from low to high, in batches of (points, weights)."""
    u, weight = np.polynomial.legendre.leggauss(10)
    edges = np.linspace(low, high, int(np.ceil((high - low) / np.pi)) + 1)
    half = 0.5 * np.diff(edges)[:, None]
    w, weights = ((edges[:-1, None] + half) + half * u).ravel(), (half * weight).ravel()
    for start in range(0, w.size, LARGEST_BATCH):
        yield w[start:start + LARGEST_BATCH], weights[start:start + LARGEST_BATCH]
