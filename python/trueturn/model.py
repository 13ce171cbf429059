"""Model Hamiltonians on a lattice.

Each strength is a number, or an array with one value for each bond (bond strengths, in the order of
``lattice.bonds``) or for each site (site strengths). A strength of zero gives no term. Signs are as written
in the formula of each function: nothing is negated silently.

Qubit q is site q for spins; for fermions qubit ``2 * site + spin`` with spin 0 (up) or 1 (down).
"""

from __future__ import annotations

import math
from typing import Literal, TypeAlias

import numpy as np
import numpy.typing as npt

from trueturn.errors import ModelError
from trueturn.lattice import Lattice
from trueturn.operator import Operator

__all__ = ["exchange", "heisenberg", "hubbard", "ising"]

Strength: TypeAlias = npt.ArrayLike
_Terms: TypeAlias = "list[tuple[float, str]]"


def ising(lattice: Lattice, *, zz: Strength, x: Strength, z: Strength = 0) -> Operator:
    """Make the Ising model in a transverse and a longitudinal field.

    H = Σ_bonds zz Z_i Z_j + Σ_sites x X_i + Σ_sites z Z_i.

    Parameters
    ----------
    lattice : Lattice
    zz : float or array, shape (bonds,)
        Bond strength. A ferromagnet has ``zz < 0``.
    x, z : float or array, shape (sites,)
        Fields.

    Returns
    -------
    Operator
        On ``lattice.sites`` qubits: bonds in order, then the X fields, then the Z fields.

    Raises
    ------
    ModelError
        A strength that is not real and finite, or an array of the wrong length.

    Examples
    --------
    >>> import trueturn as tt
    >>> h = tt.model.ising(tt.lattice.chain(2), zz=-1.0, x=0.5)
    >>> h == tt.Operator("-1.0 Z_0 Z_1 + 0.5 X_0 + 0.5 X_1")
    True
    """
    _lattice(lattice)
    terms: _Terms = []
    for (i, j), strength in zip(lattice.bonds, _per_bond("zz", zz, lattice), strict=True):
        terms.append((strength, f"Z_{i} Z_{j}"))
    terms += _fields(lattice, x=x, z=z)
    return _gather(terms, lattice.sites)


def exchange(
    lattice: Lattice,
    *,
    xx: Strength,
    yy: Strength,
    zz: Strength,
    x: Strength = 0,
    y: Strength = 0,
    z: Strength = 0,
) -> Operator:
    """Make the anisotropic exchange (XYZ) model in a field.

    H = Σ_bonds (xx X_i X_j + yy Y_i Y_j + zz Z_i Z_j) + Σ_sites (x X_i + y Y_i + z Z_i).

    Parameters
    ----------
    lattice : Lattice
    xx, yy, zz : float or array, shape (bonds,)
        Bond strengths; antiferromagnetic where positive.
    x, y, z : float or array, shape (sites,)
        Fields.

    Returns
    -------
    Operator
        On ``lattice.sites`` qubits: XX, YY, ZZ bond by bond, then the X, the Y and the Z fields.

    Raises
    ------
    ModelError
        A strength that is not real and finite, or an array of the wrong length.

    Examples
    --------
    >>> import trueturn as tt
    >>> h = tt.model.exchange(tt.lattice.chain(2), xx=1, yy=1, zz=0.5, z=[0.1, -0.1])
    >>> h == tt.Operator("X_0 X_1 + Y_0 Y_1 + 0.5 Z_0 Z_1 + 0.1 Z_0 - 0.1 Z_1")
    True
    """
    _lattice(lattice)
    strengths = [
        (letter, _per_bond(2 * letter.lower(), value, lattice)) for letter, value in (("X", xx), ("Y", yy), ("Z", zz))
    ]
    terms: _Terms = []
    for bond, (i, j) in enumerate(lattice.bonds):
        for letter, values in strengths:
            terms.append((values[bond], f"{letter}_{i} {letter}_{j}"))
    terms += _fields(lattice, x=x, y=y, z=z)
    return _gather(terms, lattice.sites)


def heisenberg(
    lattice: Lattice,
    coupling: Strength,
    *,
    z: Strength = 0,
    spin: Literal["pauli", "half"] = "pauli",
) -> Operator:
    """Make the isotropic Heisenberg model in a field along z.

    With ``spin="pauli"``, H = Σ_bonds coupling (X_i X_j + Y_i Y_j + Z_i Z_j) + Σ_sites z Z_i.
    With ``spin="half"``, H = Σ_bonds coupling S_i·S_j + Σ_sites z S^z_i, where S = (X, Y, Z)/2; so the same
    numbers give Pauli coefficients coupling/4 and z/2.

    Parameters
    ----------
    lattice : Lattice
    coupling : float or array, shape (bonds,)
        Antiferromagnetic where positive.
    z : float or array, shape (sites,)
        Field.
    spin : {"pauli", "half"}
        Whether the strengths multiply Pauli matrices or spin-1/2 operators.

    Returns
    -------
    Operator
        Terms in the order of `exchange`.

    Raises
    ------
    ModelError
        A strength that is not real and finite, an array of the wrong length, or another `spin`.

    Examples
    --------
    >>> import trueturn as tt
    >>> pair = tt.lattice.chain(2)
    >>> tt.model.heisenberg(pair, 1.0, spin="half") == tt.model.heisenberg(pair, 0.25)
    True
    """
    _lattice(lattice)
    if spin not in ("pauli", "half"):
        raise ModelError(
            f"spin: is neither 'pauli' nor 'half' ({spin!r}); choose 'pauli' for Pauli matrices "
            "or 'half' for spin operators S = (X, Y, Z)/2",
            argument="spin",
        )
    bonds, fields = _per_bond("coupling", coupling, lattice), _per_site("z", z, lattice)
    if spin == "half":
        bonds, fields = [value / 4 for value in bonds], [value / 2 for value in fields]
    return exchange(lattice, xx=bonds, yy=bonds, zz=bonds, z=fields)


def hubbard(lattice: Lattice, hopping: Strength, repulsion: Strength, potential: Strength = 0) -> Operator:
    """Make the Hubbard model, in qubits by the Jordan-Wigner transformation.

    H = -Σ_bonds,spin hopping (c†_i c_j + c†_j c_i) + Σ_sites repulsion n↑ n↓ - Σ_sites potential (n↑ + n↓).

    Parameters
    ----------
    lattice : Lattice
        At most 64 sites.
    hopping : float or array, shape (bonds,)
        Note the minus sign in front of it.
    repulsion : float or array, shape (sites,)
    potential : float or array, shape (sites,)
        Chemical potential; note the minus sign. Half filling has ``potential = repulsion / 2``.

    Returns
    -------
    Operator
        On ``2 * lattice.sites`` qubits, qubit ``2 * site + spin``; a qubit in ``|1>`` is an electron, and
        n = (1 - Z)/2. Bond by bond, up then down, the two hopping strings; then the ZZ of each site; then
        the Z of each qubit; then the identity, which is tracked exactly.

    Raises
    ------
    ModelError
        A strength that is not real and finite, an array of the wrong length, or more than 64 sites.

    Notes
    -----
    For qubits p < q, c†_p c_q + c†_q c_p = (X_p Z…Z X_q + Y_p Z…Z Y_q)/2 with Z on every qubit between.
    On a site, n↑ n↓ = (1 - Z↑ - Z↓ + Z↑Z↓)/4.

    References
    ----------
    P. Jordan and E. Wigner, "Über das Paulische Äquivalenzverbot", Z. Phys. 47, 631 (1928); J. Hubbard,
    "Electron correlations in narrow energy bands", Proc. R. Soc. A 276, 238 (1963). From memory.

    Examples
    --------
    >>> import trueturn as tt
    >>> h = tt.model.hubbard(tt.lattice.chain(1), hopping=0, repulsion=4)
    >>> h == tt.Operator("Z_0 Z_1 - Z_0 - Z_1 + 1")
    True
    """
    _lattice(lattice)
    if lattice.sites > 64:
        raise ModelError(
            f"lattice: two qubits a site need more than 128 qubits ({lattice.sites} sites); use at most 64 sites",
            argument="lattice",
        )
    t = _per_bond("hopping", hopping, lattice)
    u = _per_site("repulsion", repulsion, lattice)
    mu = _per_site("potential", potential, lattice)
    terms: _Terms = []
    for (i, j), strength in zip(lattice.bonds, t, strict=True):
        for spin in (0, 1):
            p, q = 2 * i + spin, 2 * j + spin
            between = "".join(f" Z_{k}" for k in range(p + 1, q))
            terms += [(-strength / 2, f"{letter}_{p}{between} {letter}_{q}") for letter in "XY"]
    for site in range(lattice.sites):
        terms.append((u[site] / 4, f"Z_{2 * site} Z_{2 * site + 1}"))
    for site in range(lattice.sites):
        terms += [(mu[site] / 2 - u[site] / 4, f"Z_{2 * site + spin}") for spin in (0, 1)]
    terms.append((math.fsum(u) / 4 - math.fsum(mu), ""))
    return _gather(terms, 2 * lattice.sites)


def _gather(terms: _Terms, qubits: int) -> Operator:
    return Operator.gather([term for term in terms if term[0] != 0], qubits=qubits)


def _fields(lattice: Lattice, **strengths: Strength) -> _Terms:
    return [
        (value, f"{letter.upper()}_{site}")
        for letter, strength in strengths.items()
        for site, value in enumerate(_per_site(letter, strength, lattice))
    ]


def _lattice(lattice: object) -> None:
    if not isinstance(lattice, Lattice):
        raise ModelError(
            f"lattice: is not a Lattice ({lattice!r}); make one with trueturn.lattice, for example lattice.chain(4)",
            argument="lattice",
        )


def _per_bond(argument: str, value: Strength, lattice: Lattice) -> list[float]:
    return _strengths(argument, value, len(lattice.bonds), "bond", lattice)


def _per_site(argument: str, value: Strength, lattice: Lattice) -> list[float]:
    return _strengths(argument, value, lattice.sites, "site", lattice)


def _strengths(argument: str, value: Strength, count: int, each: str, lattice: Lattice) -> list[float]:
    remedy = f"give a real number, or an array with one for each of the {count} {each}s of {lattice.name}"
    try:
        given = np.asarray(value)
    except ValueError:  # ragged nesting
        raise ModelError(f"{argument}: is not an array ({value!r}); {remedy}", argument=argument) from None
    if given.dtype.kind not in "iuf" and not (given.dtype.kind == "O" and given.size == 0):
        raise ModelError(f"{argument}: is not real ({value!r}); {remedy}", argument=argument)
    if given.ndim > 1 or (given.ndim == 1 and given.shape != (count,)):
        raise ModelError(
            f"{argument}: has the wrong shape {given.shape} for {count} {each}s; {remedy}",
            argument=argument,
        )
    strengths = [float(entry) for entry in np.broadcast_to(given, (count,))]
    for position, strength in enumerate(strengths):
        if not math.isfinite(strength):
            raise ModelError(
                f"{argument}: is not finite ({strength} at {each} {position}); {remedy}",
                argument=argument,
            )
    return strengths
