"""The electron picture: total spin of electrons, and permutations of sites with the signs of fermions.

Qubits 2s and 2s + 1 are the up and down orbitals of site s. By the Jordan-Wigner rule, qubit q has the Majorana
operators γ_2q = Z_0 … Z_{q-1} X_q and γ_{2q+1} = Z_0 … Z_{q-1} Y_q, which anticommute. Each string is, up to a power
of i, one product of them in ascending order. A permutation of orbitals permutes them; sorting the image gives a sign
for each exchange of two of them, and only orbitals with one of their two (where the string has X or Y) count.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import numpy as np

from trueturn.operator import Operator

__all__ = ["image", "spin", "spin_squared"]


def spin(axis: str, qubits: int, sites: Iterable[int] | None = None) -> Operator:
    """Return Σ over sites of the electron spin: S+ = c†_up c_down, half its sum (x) and difference (y) with S-."""
    up = [1 << 2 * site for site in (range(qubits // 2) if sites is None else sites)]
    down, both, none = [2 * bit for bit in up], [3 * bit for bit in up], [0] * len(up)
    if axis == "z":
        return Operator.from_masks([*none, *none], [*up, *down], [-0.25] * len(up) + [0.25] * len(up), qubits)
    if axis == "x":  # (XX + YY)/4
        return Operator.from_masks([*both, *both], [*none, *both], [0.25] * (2 * len(up)), qubits)
    # (XY - YX)/4, up first
    return Operator.from_masks([*both, *both], [*down, *up], [0.25] * len(up) + [-0.25] * len(up), qubits)


def spin_squared(qubits: int, touching: Iterable[int]) -> Operator:
    """Return the total electron spin squared without the pairs of sites that touch none of some qubits."""
    near = sorted({qubit // 2 for qubit in touching})
    far = sorted(set(range(qubits // 2)) - set(near))
    total = Operator("0", qubits)
    for axis in "xyz":
        close = spin(axis, qubits, near)
        total = total + close * (close + 2 * spin(axis, qubits, far))
    return total


def image(operator: Operator, sites: Mapping[int, int], flipped: Iterable[int]) -> Operator:
    """Return the operator after its electrons have moved to other sites, with a factor -1 from the flipped ones."""
    n = operator.qubits
    new = [2 * sites[q // 2] + q % 2 for q in range(n)]
    crossed = [sum(1 << k for k in range(q) if new[k] > new[q]) for q in range(n)]
    signs = sum(3 << 2 * site for site in flipped)
    x_masks, z_masks, values = [], [], []
    for x, z, value in zip(operator.x_masks.tolist(), operator.z_masks.tolist(), operator.coefficients, strict=True):
        odd = z ^ _later(x)
        even = x ^ odd
        moved_even, moved_odd = _moved(even, new), _moved(odd, new)
        moved_x = moved_even ^ moved_odd
        exchanges = sum((x & crossed[q]).bit_count() for q in _bits(x)) + (x & signs).bit_count()
        # string = i^-a product, product becomes (-1)^exchanges product', product' = i^b string'
        quarter = _quarter(moved_even, moved_odd, moved_x) - _quarter(even, odd, x) + 2 * exchanges
        x_masks.append(moved_x)
        z_masks.append(moved_odd ^ _later(moved_x))
        values.append(-value if quarter % 4 else value)
    return Operator.from_masks(x_masks, z_masks, np.array(values, dtype=np.float64), n)


def _later(mask: int) -> int:
    """The parity of the bits above each bit."""
    for shift in (1, 2, 4, 8, 16, 32, 64):
        mask ^= mask >> shift
    return mask >> 1


def _quarter(even: int, odd: int, x: int) -> int:
    """The power of i by which the ascending product exceeds its string: XY = iZ, XZ = -iY, YZ = iX."""
    later = _later(x)
    return (even & odd).bit_count() - (even & ~odd & later).bit_count() + (odd & ~even & later).bit_count()


def _bits(mask: int) -> list[int]:
    return [q for q in range(mask.bit_length()) if mask >> q & 1]


def _moved(mask: int, new: list[int]) -> int:
    return sum(1 << new[q] for q in _bits(mask))
