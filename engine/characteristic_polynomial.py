"""The characteristic polynomial of an integer matrix, exactly: modulo many primes, for all of them at once.

Each image comes from a similar upper Hessenberg matrix (J. H. Wilkinson, "The Algebraic Eigenvalue Problem", 1965,
ch. 6, here over a finite field; quoted from memory); enough images determine the integers.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import islice
from math import isqrt, prod

import numpy as np
from numpy.typing import NDArray

from encircle.engine.modular_arithmetic import chinese_remainder, primes

IntArray = NDArray[np.int64]
IntMatrix = Sequence[Sequence[int]]

_BATCH_ENTRIES = 200_000  # matrix entries treated at once: a few megabytes


def characteristic_polynomials(matrix: IntMatrix) -> list[list[int]]:
    """Monic polynomials, ascending, whose product is det(x I - matrix): one for each strongly connected part."""
    return [
        _characteristic_polynomial([[matrix[i][j] for j in part] for i in part])
        for part in _strongly_connected_parts(matrix)
    ]


def _strongly_connected_parts(matrix: IntMatrix) -> list[list[int]]:
    """Indices that reach one another; ordered so, the matrix is block triangular."""
    reach = np.array([[bool(entry) for entry in row] for row in matrix]) | np.eye(len(matrix), dtype=bool)
    for _ in range(len(matrix).bit_length()):
        reach = reach @ reach  # of truth values: no linear algebra library has to wake up
    mutual = reach & reach.T
    first = mutual.argmax(axis=1)
    return [np.flatnonzero(first == i).tolist() for i in sorted(set(first.tolist()))]


def _characteristic_polynomial(matrix: IntMatrix) -> list[int]:
    size = len(matrix)
    if size == 1:
        return [-matrix[0][0], 1]
    needed, found = 2 * _coefficient_bound(matrix), 1
    images: list[list[int]] = []
    moduli: list[int] = []
    supply = primes()
    while found <= needed:
        count = min((needed // found).bit_length() // 30 + 1, _BATCH_ENTRIES // size**2)
        for prime, image in _images(matrix, list(islice(supply, count))):
            moduli.append(prime)
            images.append(image)
        found = prod(moduli)
    return chinese_remainder(images, moduli)


def _coefficient_bound(matrix: IntMatrix) -> int:
    """A bound on every coefficient, a sum of principal minors, each below the product of its row norms (Hadamard)."""
    rows = prod(2 + isqrt(sum(entry * entry for entry in row)) for row in matrix)
    columns = prod(2 + isqrt(sum(entry * entry for entry in column)) for column in zip(*matrix, strict=True))
    return min(rows, columns)


def _images(matrix: IntMatrix, moduli: list[int]) -> Iterator[tuple[int, list[int]]]:
    """The characteristic polynomial modulo each prime; a prime that divides a pivot is left out."""
    residues = np.array([[[entry % p for entry in row] for row in matrix] for p in moduli], np.int64)
    usable = _reduce_to_hessenberg(residues, moduli)
    polynomials = _hessenberg_polynomial(residues, np.array(moduli))
    for prime, image, good in zip(moduli, polynomials.tolist(), usable.tolist(), strict=True):
        if good:
            yield prime, image


def _reduce_to_hessenberg(h: IntArray, moduli: list[int]) -> NDArray[np.bool_]:
    """Similarity to upper Hessenberg form in place, h (m, n, n) modulo moduli (m,); True where no pivot was 0."""
    p = np.array(moduli)[:, None, None]
    usable = np.ones(len(moduli), bool)
    for k in range(1, h.shape[1] - 1):
        nonzero = (h[:, k:, k - 1] != 0).sum(axis=0)
        if not nonzero.any():
            continue
        _swap(h, k, k + int(nonzero.argmax()))
        pivots = h[:, k, k - 1]
        usable &= pivots != 0
        inverses = [pow(pivot, -1, q) if pivot else 0 for pivot, q in zip(pivots.tolist(), moduli, strict=True)]
        ratio = h[:, k + 1 :, k - 1, None] * np.array(inverses)[:, None, None] % p
        h[:, k + 1 :, k - 1 :] = (h[:, k + 1 :, k - 1 :] - ratio * h[:, k, None, k - 1 :]) % p
        h[:, :, k] = (h[:, :, k] + (h[:, :, k + 1 :] * ratio.swapaxes(1, 2) % p).sum(axis=2)) % p[:, 0]
    return usable


def _swap(h: IntArray, i: int, j: int) -> None:
    """Exchange rows i and j, and columns i and j: a similarity."""
    if i != j:
        h[:, [i, j], :] = h[:, [j, i], :]
        h[:, :, [i, j]] = h[:, :, [j, i]]


def _hessenberg_polynomial(h: IntArray, moduli: IntArray) -> IntArray:
    """det(x I - h), shape (m, n + 1), by its leading minors:

    p_k = (x - h_kk) p_(k-1) - sum over i < k - 1 of h_ik (h_(i+1)i ... h_k(k-1)) p_i.
    """
    count, size, _ = h.shape
    p = moduli[:, None]
    minors = np.zeros((count, size + 1, size + 1), np.int64)
    minors[:, 0, 0] = 1
    for k in range(size):
        weights = np.empty((count, k + 1), np.int64)
        path = np.ones(count, np.int64)
        for i in range(k, -1, -1):
            weights[:, i] = h[:, i, k] * path % moduli
            path = path * h[:, i, i - 1] % moduli if i else path
        terms = weights[:, :, None] * minors[:, : k + 1, : k + 1] % p[:, :, None]
        minors[:, k + 1, 1 : k + 2] = minors[:, k, : k + 1]
        minors[:, k + 1, : k + 1] = (minors[:, k + 1, : k + 1] - terms.sum(axis=1)) % p
    return minors[:, size]
