"""Early times under a nearest-neighbour Hamiltonian: nested commutators of a local operator, order by order.

W(t) = e^{iHt} W e^{-iHt} = sum_k t^k / k! L^k W with L = i[H, .]. Each order reaches one site further, so at distance
r the OTOC begins with a power of the time that the order of the first string there sets.

H is a list of (coefficient, term), a term being letters with sites, as (0.8, "Z3 Z4") or (1.05, "X0").
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from itertools import count, islice

import numpy as np

from rcbench.arrays import BoolArray, ComplexArray, FloatArray
from rcbench.errors import InputError
from rcbench.signatures.evolution import check_operator_size, check_pauli
from rcbench.signatures.paulis import applied

Terms = Sequence[tuple[float, str]]
Strings = dict[tuple[int, int], float]  # (x bits, z bits) of i^(x.z) X^x Z^z, bit j for qubit j, to its coefficient
MOST_STRINGS = 2_000_000
_FACTOR = re.compile(r"([XYZ])(\d+)")


def read_terms(terms: Terms, n_qubits: int) -> Strings:
    """The Hamiltonian as Pauli strings, equal terms added.

    Raises:
        InputError: a term that cannot be read, acts outside the line, or on other than one site or two neighbours.
    """
    out: Strings = {}
    for coefficient, text in terms:
        factors = [_FACTOR.fullmatch(piece) for piece in text.split()]
        if not factors or any(factor is None for factor in factors):
            raise InputError("term", text, "letters X, Y, Z with sites, as 'Z3 Z4' or 'X0'")
        letters = {int(factor[2]): factor[1] for factor in factors if factor}
        sites = sorted(letters)
        if len(sites) != len(factors) or sites[-1] >= n_qubits:
            raise InputError("term", text, f"each site once, from 0 to {n_qubits - 1}")
        if len(sites) > 2 or sites[-1] - sites[0] > 1:
            raise InputError("term", text, "one site or two neighbouring sites")
        if not np.isfinite(coefficient):
            raise InputError("coefficient", coefficient, "a finite number")
        key = _string(letters)
        out[key] = out.get(key, 0.0) + float(coefficient)
    return out


def _string(letters: Mapping[int, str]) -> tuple[int, int]:
    x = sum(1 << site for site, letter in letters.items() if letter in "XY")
    z = sum(1 << site for site, letter in letters.items() if letter in "YZ")
    return x, z


def _anticommute(a: tuple[int, int], b: tuple[int, int]) -> bool:
    return bool(((a[0] & b[1]).bit_count() + (a[1] & b[0]).bit_count()) % 2)


def _turned(h: tuple[int, int], p: tuple[int, int]) -> tuple[tuple[int, int], float]:
    """i[h, p] of anticommuting strings: the string and 2 or -2."""
    product = h[0] ^ p[0], h[1] ^ p[1]
    # h p = i^power product, with each string as i^(x.z) X^x Z^z; X^a Z^b X^c Z^d = (-1)^(b.c) X^(a+c) Z^(b+d)
    power = (h[0] & h[1]).bit_count() + (p[0] & p[1]).bit_count() - (product[0] & product[1]).bit_count()
    power += 2 * (h[1] & p[0]).bit_count()
    return product, -2.0 if power % 4 == 1 else 2.0


def nested_commutators(terms: Terms, n_qubits: int, site: int, pauli: str, order: int) -> list[Strings]:
    """Coefficients of t^k in W(t), k = 0 to `order`: Pauli strings of L^k W / k!.

    Args:
        terms: H, of one-site and neighbouring two-site terms. n_qubits: length of the open line.
        site, pauli: W. order: 0 or more.
    Raises:
        InputError: bad terms, site, letter or order, or more than two million strings.

    Source: Baker-Campbell-Hausdorff; Roberts and Swingle, Phys. Rev. Lett. 117, 091602 (2016), arXiv:1603.09298.
    """
    if order < 0:
        raise InputError("order", order, "a whole number, 0 or more")
    return list(islice(_orders(terms, n_qubits, site, pauli), order + 1))


def _orders(terms: Terms, n_qubits: int, site: int, pauli: str) -> Iterator[Strings]:
    """Order after order without end."""
    check_pauli(site, pauli, n_qubits)
    hamiltonian = read_terms(terms, n_qubits)
    strings: Strings = {_string({site: pauli}): 1.0}
    for k in count(1):
        yield strings
        found: Strings = {}
        for string, weight in strings.items():
            for term, strength in hamiltonian.items():
                if _anticommute(term, string):
                    product, sign = _turned(term, string)
                    found[product] = found.get(product, 0.0) + sign * strength * weight / k
        if len(found) > MOST_STRINGS:
            raise InputError("order", k, f"at most {k - 1} here, {len(strings)} strings; more do not fit")
        strings = {string: value for string, value in found.items() if value}


def support_by_order(terms: Terms, n_qubits: int, site: int, pauli: str, order: int) -> BoolArray:
    """(order + 1, n) whether the term of t^k acts on each site. Arguments and errors as `nested_commutators`."""
    out = np.zeros((order + 1, n_qubits), dtype=np.bool_)
    for k, strings in enumerate(nested_commutators(terms, n_qubits, site, pauli, order)):
        touched = 0
        for x, z in strings:
            touched |= x | z
        out[k] = [(touched >> j) & 1 for j in range(n_qubits)]
    return out


def leading_growth(terms: Terms, n_qubits: int, w: tuple[str, int], v: tuple[str, int]) -> tuple[int, float]:
    """Power and coefficient of the first growth of 1 - F, F = (1/D) tr(W(t) V W(t) V): 1 - F = c t^p + ...

    Strings that anticommute with V give 1 - F = 2 sum c_P(t)^2, so p is twice the order of the first of them.

    Args:
        terms, n_qubits: as `nested_commutators`. w, v: letter and site.
    Raises:
        InputError: as `nested_commutators`; no growth up to twice the distance and two orders more.

    Source: as `nested_commutators`.
    """
    check_pauli(v[1], v[0], n_qubits)
    probe = _string({v[1]: v[0]})
    most = 2 * abs(w[1] - v[1]) + 2
    for order, strings in enumerate(islice(_orders(terms, n_qubits, w[1], w[0]), most + 1)):
        grown = sum(value**2 for string, value in strings.items() if _anticommute(string, probe))
        if grown > 1e-24:  # terms that cancel leave rounding
            return 2 * order, 2 * grown
    raise InputError(
        "terms", f"{len(terms)} terms", f"a Hamiltonian that carries W to site {v[1]} within {most} orders"
    )


def otoc_series(
    terms: Terms, n_qubits: int, w: tuple[str, int], v: tuple[str, int], times: FloatArray, order: int
) -> FloatArray:
    """OTOC at infinite temperature from W(t) cut after `order`; good to about t^(order + 1).

    Args:
        terms, n_qubits, w, v: as `leading_growth`. times: (m,). order: 0 or more.
    Returns:
        (m,) F(t) = 1 - 2 sum c_P(t)^2 over the strings that anticommute with V.
    Raises:
        InputError: as `nested_commutators`.
    """
    check_pauli(v[1], v[0], n_qubits)
    probe = _string({v[1]: v[0]})
    sums: dict[tuple[int, int], FloatArray] = {}
    for k, strings in enumerate(nested_commutators(terms, n_qubits, w[1], w[0], order)):
        for string, value in strings.items():
            if _anticommute(string, probe):
                sums[string] = sums.get(string, np.zeros(len(times))) + value * np.asarray(times) ** k
    total = np.zeros(len(times))
    for amplitude in sums.values():
        total += amplitude**2
    return 1 - 2 * total


def dense_hamiltonian(terms: Terms, n_qubits: int) -> ComplexArray:
    """(D, D) matrix of H, to 12 qubits, qubit 0 the most significant bit.

    Raises:
        InputError: bad terms, or more than 12 qubits.
    """
    check_operator_size(n_qubits)
    out = np.zeros((2**n_qubits,) * 2, dtype=np.complex128)
    index = np.arange(2**n_qubits)
    for (x, z), strength in read_terms(terms, n_qubits).items():
        flip, sign = _index_bits(x, n_qubits), _index_bits(z, n_qubits)
        phases = 1j ** ((x & z).bit_count()) * (1 - 2.0 * (np.bitwise_count(index & sign) % 2))
        out[index ^ flip, index] += strength * phases
    return out


def _index_bits(mask: int, n_qubits: int) -> int:
    """Bit j of a mask as the bit of qubit j in a state index."""
    return sum(1 << (n_qubits - 1 - j) for j in range(n_qubits) if mask >> j & 1)


def exact_otoc(terms: Terms, n_qubits: int, w: tuple[str, int], v: tuple[str, int], times: FloatArray) -> FloatArray:
    """The same OTOC from the full spectrum of H, to 12 qubits; arguments as `otoc_series`.

    Cost: one diagonalisation, and four products of (D, D) matrices for each time.
    """
    check_pauli(w[1], w[0], n_qubits)
    check_pauli(v[1], v[0], n_qubits)
    energies, basis = np.linalg.eigh(dense_hamiltonian(terms, n_qubits))
    first, second = (_in_basis(basis, letter, site) for letter, site in (w, v))
    out = np.empty(len(times))
    for place, time in enumerate(np.asarray(times)):
        phases = np.exp(1j * time * energies)
        evolved = phases[:, None] * first * phases.conj()
        product = evolved @ second
        out[place] = float(np.sum(product * product.T).real) / len(energies)
    return out


def _in_basis(basis: ComplexArray, letter: str, site: int) -> ComplexArray:
    columns = applied(np.ascontiguousarray(basis.T), site, letter).T
    matrix: ComplexArray = basis.conj().T @ columns
    return matrix
