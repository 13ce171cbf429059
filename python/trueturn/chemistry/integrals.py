"""Integrals of electrons in orthonormal orbitals, their active space, and their Hamiltonian."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any, Literal, TypeAlias

import numpy as np
import numpy.typing as npt

from trueturn import _memory
from trueturn.chemistry import _masks
from trueturn.chemistry.encodings import Encoding, checked_encoding
from trueturn.chemistry.fermions import StringSum, add_pair_products, add_pairs, pair_strings
from trueturn.errors import ArgumentError
from trueturn.operator import Operator

__all__ = ["SYMMETRIC_TO", "Integrals", "Orbitals", "Order", "Reals", "pair_table"]

Reals: TypeAlias = npt.NDArray[np.float64]
Orbitals: TypeAlias = "int | Iterable[int]"
Order: TypeAlias = Literal["interleaved", "blocked"]

ORDERS = ("interleaved", "blocked")
MOST_ORBITALS = 64
SYMMETRIC_TO = 1e-10
"""How far two entries for one integral may differ: programs print the images of one number from separate sums."""


@dataclass(frozen=True, eq=False)
class Integrals:
    """Real integrals over orbitals, the same for both spins or different.

    Make them with `from_arrays` or `trueturn.chemistry.read_integrals`.

    Attributes
    ----------
    constant : float
        Energy of nuclei and frozen electrons.
    one : (ndarray, ndarray), shape (orbitals, orbitals)
        h for spin up and for spin down; one and the same array where orbitals are shared.
    two : (ndarray, ndarray, ndarray), shape (pairs, pairs)
        (ij|kl) in chemists' order for spins up up, up down and down down; row and column number the pairs i ≤ j and k ≤ l as
        `numpy.triu_indices` does.
    electrons : (int, int) or None
        Numbers of electrons with spin up and down, where they are known.

    Notes
    -----
    H = constant + Σ h_ij a†_iσ a_jσ + ½ Σ (ij|kl) a†_iσ a†_kτ a_lτ a_jσ over orbitals and spins.
    """

    constant: float
    one: tuple[Reals, Reals]
    two: tuple[Reals, Reals, Reals]
    electrons: tuple[int, int] | None = None

    @classmethod
    def from_arrays(
        cls, constant: float, one: npt.ArrayLike, two: npt.ArrayLike, electrons: tuple[int, int] | None = None
    ) -> Integrals:
        """Make integrals that both spins share from full arrays.

        Parameters
        ----------
        constant : float
        one : array_like, shape (n, n)
            Symmetric.
        two : array_like, shape (n, n, n, n)
            (ij|kl) in chemists' order, with all eight symmetries.
        electrons : (int, int), optional

        Raises
        ------
        ArgumentError
            Shapes do not fit, a number is not finite, or a symmetry is broken by more than 1e-10.
        """
        h, g = np.array(one, dtype=np.float64), np.array(two, dtype=np.float64)
        n = len(h) if h.ndim else 0
        if n < 1 or h.shape != (n, n) or g.shape != (n, n, n, n):
            raise ArgumentError(
                f"one, two: shapes do not fit ({h.shape} and {g.shape}); give (n, n) and (n, n, n, n)",
                argument="two",
                value=g.shape,
            )
        if not (np.isfinite(h).all() and np.isfinite(g).all() and np.isfinite(constant)):
            raise ArgumentError("one, two: not finite; give finite integrals", argument="two", value=None)
        images = (g.transpose(1, 0, 2, 3), g.transpose(0, 1, 3, 2), g.transpose(2, 3, 0, 1))
        gap = max(float(np.abs(h - h.T).max()), *(float(np.abs(g - image).max()) for image in images))
        if gap > SYMMETRIC_TO:
            raise ArgumentError(
                f"one, two: not symmetric (two images of one integral differ by {gap:.3g}); give real orbitals in chemists' "
                "order, (ij|kl) = (ji|kl) = (ij|lk) = (kl|ij)",
                argument="two",
                value=gap,
            )
        i, j = np.triu_indices(n)
        pairs = np.ascontiguousarray(g[i, j][:, i, j])
        return cls(float(constant), (h, h), (pairs, pairs, pairs), electrons)

    @property
    def orbitals(self) -> int:
        """Number of spatial orbitals; a spin orbital is one qubit, so twice as many qubits before any is dropped."""
        return len(self.one[0])

    def active(self, frozen: Orbitals = 0, window: Orbitals | None = None) -> Integrals:
        """Freeze filled orbitals into the constant and keep a window of the others.

        Parameters
        ----------
        frozen : int or iterable of int
            Orbitals that stay filled with two electrons: that many lowest ones, or these, counted from 0.
        window : int or iterable of int, optional
            Orbitals that stay active: that many next ones after the frozen, or these, in this order. All others but the
            frozen are left empty. Default: all but the frozen.

        Returns
        -------
        Integrals
            Over the window; `electrons` less the frozen ones.

        Raises
        ------
        ArgumentError
            An orbital is out of range, named twice, or both frozen and active; nothing is active; or the electrons left do
            not fit.

        Notes
        -----
        With F the frozen orbitals: constant + Σ_F h↑ + h↓ + ½ Σ_FF' [(ff|f'f') - (ff'|f'f)] for equal spins + (ff|f'f') for
        different ones; h_ij + Σ_F [(ij|ff) - (if|fj)] + (ij|ff) of the other spin. Exact for the part of the space where F is
        filled and what is outside of the window is empty.
        """
        n = self.orbitals
        filled = _orbitals("frozen", frozen, n, range(n))
        rest = [orbital for orbital in range(n) if orbital not in set(filled)]
        kept = rest if window is None else _orbitals("window", window, n, rest)
        shared = sorted(set(filled) & set(kept))
        if shared:
            raise ArgumentError(
                f"window: holds a frozen orbital ({shared[0]}); leave it out of frozen or of window",
                argument="window",
                value=shared[0],
            )
        if not kept:
            raise ArgumentError(
                f"window: no active orbital is left (of {n}); freeze fewer or name some",
                argument="window",
                value=window,
            )
        f, k = np.array(filled, dtype=np.intp), np.array(kept, dtype=np.intp)
        table = pair_table(n)
        diagonal, mixed = table[f, f], table[np.ix_(k, f)]
        inside = table[np.ix_(k, k)]
        uu, ud, dd = self.two
        constant = self.constant
        one = []
        for spin, same, other in ((0, uu, ud), (1, dd, ud.T)):
            h = self.one[spin]
            exchange = same[table[np.ix_(f, f)], table[np.ix_(f, f)]]
            constant += float(h[f, f].sum() + 0.5 * (same[np.ix_(diagonal, diagonal)].sum() - exchange.sum()))
            constant += 0.5 * float(other[np.ix_(diagonal, diagonal)].sum())
            swapped = same[mixed[:, None, :], mixed[None, :, :]].sum(axis=-1)
            one.append(h[np.ix_(k, k)] + (same + other)[inside][..., diagonal].sum(axis=-1) - swapped)
        i, j = np.triu_indices(len(kept))
        rows = table[k[i], k[j]]
        two = tuple(np.ascontiguousarray(block[np.ix_(rows, rows)]) for block in self.two)
        electrons = self.electrons
        if electrons is not None:
            electrons = (electrons[0] - len(filled), electrons[1] - len(filled))
            if min(electrons) < 0 or max(electrons) > len(kept):
                raise ArgumentError(
                    f"window: {electrons[0]} electrons with spin up and {electrons[1]} with spin down are left for "
                    f"{len(kept)} active orbitals; freeze other orbitals or widen the window",
                    argument="window",
                    value=electrons,
                )
        return Integrals(constant, (one[0], one[1]), two, electrons)  # type: ignore[arg-type]

    def operator(
        self,
        encoding: str = "jordan-wigner",
        *,
        order: Order | None = None,
        drop_parity_qubits: bool = False,
    ) -> Operator:
        """Return the Hamiltonian in qubits.

        Parameters
        ----------
        encoding : "jordan-wigner", "parity" or "bravyi-kitaev"
        order : "interleaved" or "blocked", optional
            Spin orbital ``2 * orbital + spin``, or ``spin * orbitals + orbital``; spin 0 is up. Default: interleaved, and
            blocked where qubits are dropped, which needs it.
        drop_parity_qubits : bool
            Leave out the two qubits that hold the parities of the electrons with spin up and of all, at the values that
            `electrons` fixes. What is left acts on states of these parities alone.

        Returns
        -------
        Operator
            In the order of the masks: the constant, other diagonal terms, the rest.

        Raises
        ------
        ArgumentError
            The encoding or the order is unknown; more than 64 orbitals; qubits cannot be dropped.
        MemoryRefusedError
            The terms would not fit.

        Notes
        -----
        With pair operators T_A (see `trueturn.chemistry.fermions`) H = constant + Σ (h_ij - ½ Σ_k (ik|kj)) T_ij +
        ½ Σ_AB (A|B) T_A T_B. Cost: 4 strings for each pair of pairs with a non-zero integral, about n⁴/2 × 4 for n orbitals.
        A coefficient is within m u Σ|contributions| of the exact one for its m contributions, u = 2^-53; sums that are no
        more than that are dropped.
        """
        target, laid_out = self._target(encoding, order, drop_parity_qubits)
        n = self.orbitals
        i, j = np.triu_indices(n)
        filled = sum(int(np.count_nonzero(block)) for block in self.two) + int(np.count_nonzero(self.two[1]))
        # Half of the pairs of pairs, four strings each; masks and sums three times while they are sorted, then as integers.
        needed = 2 * filled * (3 * (16 * _masks.word_count(2 * n) + 24) + 120)
        _memory.require(needed, "operator")
        total = StringSum(2 * n)
        both = [pair_strings(_modes(i, spin, n, laid_out), _modes(j, spin, n, laid_out), 2 * n) for spin in (0, 1)]
        table = pair_table(n)
        for spin, block in ((0, self.two[0]), (1, self.two[2])):
            mixed = block[table[:, None, :], table[None, :, :]].sum(axis=-1)
            add_pairs(total, both[spin], (self.one[spin] - 0.5 * mixed)[i, j])
        joined = type(both[0])(*(np.concatenate(parts) for parts in zip(*map(_columns, both), strict=True)))
        uu, ud, dd = self.two
        add_pair_products(total, joined, np.block([[uu, ud], [ud.T, dd]]))
        nothing = np.zeros((1, _masks.word_count(2 * n)), dtype=np.uint64)
        total.add(nothing, nothing, np.array([self.constant]))
        x, z, coefficients = target.strings(*total.strings())
        return Operator.from_masks(_masks.integers(x), _masks.integers(z), coefficients, target.qubits)

    def determinant(
        self, encoding: str = "jordan-wigner", *, order: Order | None = None, drop_parity_qubits: bool = False
    ) -> str:
        """Return the product state in which the electrons fill the orbitals from the first on, for `State.product`.

        Parameters
        ----------
        encoding, order, drop_parity_qubits
            As for `operator`.

        Returns
        -------
        str
            Of 0 and 1, qubit 0 first. The Hartree-Fock state where the orbitals are its own, in the order of their energy.

        Raises
        ------
        ArgumentError
            The numbers of electrons are not known; or as `operator` raises it.
        """
        up, down = self._sector("determinant")
        target, laid_out = self._target(encoding, order, drop_parity_qubits)
        n = self.orbitals
        occupations = np.zeros(2 * n, dtype=np.uint8)
        for spin, count in ((0, up), (1, down)):
            occupations[_modes(np.arange(count), spin, n, laid_out)] = 1
        return target.basis_state(occupations)

    def _target(self, encoding: str, order: str | None, drop: bool) -> tuple[Encoding, str]:
        checked_encoding(encoding)
        if self.orbitals > MOST_ORBITALS:
            raise ArgumentError(
                f"window: {self.orbitals} orbitals need more than 128 qubits; keep at most {MOST_ORBITALS} active",
                argument="window",
                value=self.orbitals,
            )
        if order not in (None, *ORDERS):
            raise ArgumentError(f"order: unknown ({order!r}); give one of {ORDERS}", argument="order", value=order)
        if drop and order == "interleaved":
            raise ArgumentError(
                "order: interleaved spins leave the parity of spin up in no qubit of its own; use order='blocked'",
                argument="order",
                value=order,
            )
        sector = self._sector("drop_parity_qubits") if drop else None
        return Encoding(encoding, 2 * self.orbitals, sector), order or ("blocked" if drop else "interleaved")

    def _sector(self, argument: str) -> tuple[int, int]:
        if self.electrons is None:
            raise ArgumentError(
                f"{argument}: the numbers of electrons are not known (NELEC and MS2 of the file); give electrons=(up, down)",
                argument=argument,
                value=None,
            )
        return self.electrons


def pair_table(n: int) -> npt.NDArray[np.intp]:
    """Return the number of each pair of orbitals, shape (n, n), as `numpy.triu_indices` counts them."""
    table = np.zeros((n, n), dtype=np.intp)
    i, j = np.triu_indices(n)
    table[i, j] = table[j, i] = np.arange(len(i))
    return table


def _modes(orbitals: npt.NDArray[Any], spin: int, n: int, order: str) -> npt.NDArray[Any]:
    found: npt.NDArray[Any] = 2 * orbitals + spin if order == "interleaved" else spin * n + orbitals
    return found


def _columns(strings: Any) -> tuple[Any, Any, Any]:
    return strings.x, strings.z, strings.coefficients


def _orbitals(argument: str, given: Any, n: int, choices: Iterable[int]) -> list[int]:
    """Return orbital numbers: the first `given` of the choices where it is a count, else the ones named."""
    remedy = f"give a count, or orbitals from 0 to {n - 1}"
    if isinstance(given, (int, np.integer)) and not isinstance(given, bool):
        listed = list(choices)
        if not 0 <= given <= len(listed):
            raise ArgumentError(
                f"{argument}: out of range ({given} of {len(listed)} orbitals); {remedy}",
                argument=argument,
                value=given,
            )
        return listed[:given]
    try:
        found = [int(orbital) for orbital in given if not isinstance(orbital, bool)]
        whole = not isinstance(given, str) and all(a == b for a, b in zip(found, given, strict=True))
    except (TypeError, ValueError, OverflowError):
        found, whole = [], False
    if not whole:
        raise ArgumentError(f"{argument}: no orbital numbers ({given!r}); {remedy}", argument=argument, value=given)
    for place, orbital in enumerate(found):
        if not 0 <= orbital < n or orbital in found[:place]:
            wrong = "named twice" if 0 <= orbital < n else "out of range"
            raise ArgumentError(f"{argument}: orbital {wrong} ({orbital}); {remedy}", argument=argument, value=orbital)
    return found
