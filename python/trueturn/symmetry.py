"""Symmetries of a Hamiltonian, and which parts of a partition keep them.

A circuit of parts that all keep a symmetry keeps it exactly, at any step length. A part that breaks one which
the Hamiltonian has can let the conserved quantity drift: an error that shows at once in an experiment. (Parts
that break it one by one can still keep it together, as XX, YY and ZZ of a bond do in direct succession.)
Everything is decided in the Pauli algebra, on as many qubits as operators have:

- A conserved operator Q is kept by A where i[A, Q] vanishes (up to what rounding can leave).
- A relabelling of qubits is kept where the relabelled operator equals the operator.
- Complex conjugation turns Y into -Y and leaves X and Z: kept where each string has an even number of Y.
- Spin-flip time reversal (conjugation, then Y on every qubit) turns X, Y and Z into minus themselves: kept where
  each string has even weight.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

from trueturn import _arguments, _memory
from trueturn import _symmetry_electrons as electrons
from trueturn._symmetry_relabelled import relabelling, relabellings
from trueturn._symmetry_rows import Symmetries, Symmetry, row
from trueturn.errors import ArgumentError, OperatorError, PartitionError
from trueturn.lattice import Lattice
from trueturn.operator import Operator
from trueturn.partition import Partition

__all__ = ["Symmetries", "Symmetry", "symmetries"]

Relabelling = Mapping[int, int]


def symmetries(
    operator: Operator,
    partition: Partition | None = None,
    *,
    lattice: Lattice | None = None,
    also: Mapping[str, Operator | Relabelling] | None = None,
) -> Symmetries:
    """Find which symmetries a Hamiltonian has, and which of them each part keeps.

    Parameters
    ----------
    operator : Operator
    partition : Partition, optional
        Of this operator.
    lattice : Lattice, optional
        Whose sites are the qubits, or pairs of qubits (2s, 2s + 1) as in `trueturn.model.hubbard`. Its translations
        and reflections, those that map bonds to bonds, are then looked at in place of the ones below: as moves of
        qubits, or of electrons.
    also : mapping of str to Operator or mapping of int to int, optional
        Further symmetries to look at: a quantity that may be conserved, or a relabelling {old: new} that
        permutes the qubits.

    Returns
    -------
    Symmetries
        With these rows, on n qubits:

        - ``particle number``: Σ (1 - Z_q)/2, for spin orbitals under the Jordan-Wigner transformation; the same
          as ``spin z`` as far as conservation goes.
        - ``electron spin z``: Σ over pairs of qubits (2s, 2s+1) of (Z_{2s+1} - Z_{2s})/4, up before down as in
          `trueturn.model.hubbard`; for even n only.
        - ``electron spin x``, ``electron spin y``, ``electron spin squared``: of the same electrons, from
          S+ = Σ c†_up c_down; for even n and a kept particle number.
        - ``spin x``, ``spin y``, ``spin z``: Σ X_q/2 and so on, of n spins 1/2.
        - ``spin squared``: (Σ X/2)² + (Σ Y/2)² + (Σ Z/2)².
        - ``parity x``, ``parity y``, ``parity z``: the product of X (Y, Z) over all qubits.
        - ``translation by d``: qubit q becomes q + d modulo n; d is the least divisor of n below n that is a
          symmetry, or 1 when there is none; for n of at least 2.
        - ``translation by d columns (r × c)``: the same of columns, with qubit number row c + column; where the
          Hamiltonian keeps it, for each n = r c. ``translation by d rows (r × c)`` beside it where it is the
          translation of the ring above.
        - ``reflection``: qubit q becomes n - 1 - q; for n of at least 2.
        - ``fermion translation by d (sites)``, ``fermion translation by d columns (r × c sites)``, ``fermion reflection
          (sites)``: the same with n/2 sites of electrons and with the signs of fermions, periodic. ``antiperiodic``
          in the name: with a further sign for electrons that cross the boundary, looked at where the periodic one is
          not kept. For at least two sites and a kept particle number, and not where `lattice` has n sites.
        - with a lattice in two dimensions, ``reflection of rows (r × c)``, ``reflection of columns (r × c)`` and, of
          a square, ``reflection in the diagonal (r × c)``.
        - ``conjugation``: time reversal without spin, complex conjugation in the Z basis.
        - ``spin-flip time reversal``: conjugation followed by Y on all qubits.
        - those of `also`.

    Raises
    ------
    OperatorError
        `operator` is not an Operator, or an entry of `also` is neither quantity nor permutation of its qubits.
    PartitionError
        `partition` is not a Partition, or does not sum to the operator.
    ArgumentError
        `lattice` is not a Lattice, or has neither n nor n/2 sites; `also` is not a mapping, or a name in it is taken.

    Notes
    -----
    Brackets count as vanished as in `Operator.bracket_vanishes`; a relabelled operator as equal when no coefficient
    differs by more than 2⁻⁵⁰ times the largest. Rows of electrons and rows of spins are two pictures of the same
    qubits; which one is meant, the model decides. A boundary whose sign depends on the parity of the particle
    number (as where a ring of spins becomes fermions) is no symmetry of the whole operator, and is not looked for in
    single sectors. A sum of parts can have a symmetry that no part has, and
    never lacks one that all parts have. Cost is small beside anything done with states: the
    total spin squared has 3 n²/2 strings, and its bracket is left out where all three components are kept.

    Examples
    --------
    >>> import trueturn as tt
    >>> from trueturn.symmetry import symmetries
    >>> h = tt.model.heisenberg(tt.lattice.ring(4), 1.0, z=0.5)
    >>> found = symmetries(h, tt.Partition.of(h, "axis"))
    >>> found["spin z"].kept, found["spin z"].broken_by
    (True, (0, 1))
    >>> print(found)
    symmetry                          Hamiltonian  parts
    particle number                   keeps        2 of 3 break (0, 1); may drift
    electron spin z                   breaks       2 of 3 break (0, 1)
    electron spin x                   breaks       all break (0, 1, 2)
    electron spin y                   breaks       all break (0, 1, 2)
    electron spin squared             breaks       2 of 3 break (0, 1)
    spin x                            breaks       2 of 3 break (1, 2)
    spin y                            breaks       2 of 3 break (0, 2)
    spin z                            keeps        2 of 3 break (0, 1); may drift
    spin squared                      keeps        all break (0, 1, 2); may drift
    parity x                          breaks       1 of 3 break (2)
    parity y                          breaks       1 of 3 break (2)
    parity z                          keeps        all keep
    translation by 1                  keeps        all keep
    translation by 1 column (2 × 2)   keeps        all keep
    reflection                        keeps        all keep
    fermion translation by 1 (sites)  breaks       2 of 3 break (0, 1)
    fermion reflection (sites)        breaks       2 of 3 break (0, 1)
    conjugation                       keeps        all keep
    spin-flip time reversal           breaks       1 of 3 break (2)
    electron, fermion: qubits 2s and 2s + 1 are the up and down orbitals of site s (Jordan-Wigner)
    spin x, y, z, squared: another picture, in which each qubit is a spin 1/2
    """
    if not isinstance(operator, Operator):
        raise OperatorError(
            f"operator: is not an Operator ({operator!r}); use trueturn.Operator or trueturn.model",
            argument="operator",
        )
    if partition is not None and not isinstance(partition, Partition):
        raise PartitionError(
            f"partition: is not a Partition ({partition!r}); make one with Partition.of(operator, rule)",
            argument="partition",
        )
    if partition is not None:
        partition.require_sum(operator)
    _require_fitting(lattice, operator.qubits)
    judged = [operator, *(partition.parts if partition is not None else ())]
    rows = _conserved(judged)
    electronic = operator.qubits % 2 == 0 and rows[0].kept
    rows += [*relabellings(judged, lattice, electronic), *_reversals(judged)]
    for name, symmetry in _further(also, [each.name for each in rows]).items():
        rows.append(_custom(name, symmetry, judged))
    return Symmetries(tuple(rows))


def _conserved(judged: list[Operator]) -> list[Symmetry]:
    n = judged[0].qubits
    spins = {axis: _total(axis, n, [0.5] * n) for axis in "xyz"}
    number = _total("z", n, [-0.5] * n) + 0.5 * n
    rows = [_quantity("particle number", "Σ (1 - Z)/2, occupied spin orbitals", number, judged)]
    if n % 2 == 0:
        staggered = _total("z", n, [-0.25, 0.25] * (n // 2))
        rows.append(_quantity("electron spin z", "half of up minus down, on even and odd qubits", staggered, judged))
        if rows[0].kept:
            rows += _electron_spins(rows[1], judged)
    components = [
        _quantity(f"spin {axis}", f"Σ {axis.upper()}/2 over all qubits", spin, judged) for axis, spin in spins.items()
    ]
    rows += [*components, _spin_squared(components, judged)]
    everywhere = (1 << n) - 1
    for axis, x, z in (("x", everywhere, 0), ("y", everywhere, everywhere), ("z", 0, everywhere)):
        parity = Operator.from_masks([x], [z], [1.0], n)
        rows.append(_quantity(f"parity {axis}", f"product of {axis.upper()} over all qubits", parity, judged))
    return rows


def _quantity(name: str, meaning: str, quantity: Operator, judged: list[Operator]) -> Symmetry:
    return row(name, meaning, judged, _commuting_with(quantity), quantity)


def _commuting_with(quantity: Operator) -> Callable[[Operator], bool]:
    """`Operator.bracket_vanishes`, asking the system for its memory once instead of each time."""
    allowed = _memory.allowed_bytes()
    return lambda operator: quantity._terms.bracket_vanishes(operator._terms, allowed)


def _total(axis: str, qubits: int, weights: list[float]) -> Operator:
    bits = [1 << qubit for qubit in range(qubits)]
    none = [0] * qubits
    return Operator.from_masks(none if axis == "z" else bits, none if axis == "x" else bits, weights, qubits)


def _spin_squared(components: list[Symmetry], judged: list[Operator]) -> Symmetry:
    """Spare the bracket where all components are kept: what commutes with them commutes with their squares."""
    n = judged[0].qubits
    known = [all(each) for each in zip(*((row.kept, *row.parts) for row in components), strict=True)]
    kept, *parts = (
        sure or _squared(n, operator.support()).bracket_vanishes(operator)
        for sure, operator in zip(known, judged, strict=True)
    )
    return Symmetry("spin squared", "total spin, S(S + 1)", kept, tuple(parts), _squared(n, range(n)))


def _squared(qubits: int, touching: Sequence[int]) -> Operator:
    """3n/4 + Σ over pairs of (XX + YY + ZZ)/2, without the pairs that touch none of some qubits."""
    pairs = sorted({1 << a | 1 << b for a in touching for b in range(qubits) if a != b})
    none = [0] * len(pairs)
    x, z = [*pairs, *pairs, *none, 0], [*none, *pairs, *pairs, 0]
    return Operator.from_masks(x, z, [0.5] * (3 * len(pairs)) + [0.75 * qubits], qubits)


def _electron_spins(component: Symmetry, judged: list[Operator]) -> list[Symmetry]:
    """Spare the bracket of the square as `_spin_squared` does; pairs of sites away from an operator commute with it."""
    n = judged[0].qubits
    rows = [
        _quantity(f"electron spin {axis}", "from S+ = Σ c†_up c_down of electrons", electrons.spin(axis, n), judged)
        for axis in "xy"
    ]
    known = [all(each) for each in zip(*((each.kept, *each.parts) for each in (component, *rows)), strict=True)]
    kept, *parts = (
        sure or electrons.spin_squared(n, operator.support()).bracket_vanishes(operator)
        for sure, operator in zip(known, judged, strict=True)
    )
    total = electrons.spin_squared(n, range(n))
    return [*rows, Symmetry("electron spin squared", "total spin of electrons, S(S + 1)", kept, tuple(parts), total)]


def _require_fitting(lattice: object, qubits: int) -> None:
    if lattice is None:
        return
    if not isinstance(lattice, Lattice):
        raise ArgumentError(
            f"lattice: is not a Lattice ({lattice!r}); make one with trueturn.lattice, for example lattice.ring(4)",
            argument="lattice",
            value=lattice,
        )
    if lattice.sites != qubits and 2 * lattice.sites != qubits:
        raise ArgumentError(
            f"lattice: does not fit {qubits} qubits ({lattice.name} of {lattice.sites} sites); "
            "give one with a site for each qubit, or for each two (up and down) of electrons",
            argument="lattice",
            value=lattice,
        )


def _reversals(judged: list[Operator]) -> list[Symmetry]:
    def real(operator: Operator) -> bool:
        strings = zip(operator.x_masks, operator.z_masks, strict=True)
        return all((int(x) & int(z)).bit_count() % 2 == 0 for x, z in strings)

    def even(operator: Operator) -> bool:
        strings = zip(operator.x_masks, operator.z_masks, strict=True)
        return all((int(x) | int(z)).bit_count() % 2 == 0 for x, z in strings)

    return [
        row("conjugation", "complex conjugation in the Z basis", judged, real),
        row("spin-flip time reversal", "complex conjugation, then Y on all qubits", judged, even),
    ]


def _further(also: object, taken: list[str]) -> dict[str, object]:
    if also is None:
        return {}
    if not isinstance(also, Mapping) or not all(isinstance(name, str) for name in also):
        raise ArgumentError(
            f"also: is not a mapping of names ({also!r}); give {{name: Operator or {{old: new}}}}",
            argument="also",
            value=also,
        )
    for name in also:
        if name in taken:
            raise ArgumentError(
                f"also: has a name that is taken ({name!r}); choose another", argument="also", value=name
            )
    return dict(also)


def _custom(name: str, symmetry: object, judged: list[Operator]) -> Symmetry:
    n = judged[0].qubits
    if isinstance(symmetry, Operator):
        return _quantity(name, "given quantity", symmetry, judged)
    if not isinstance(symmetry, Mapping):
        raise OperatorError(
            f"also: {name!r} is neither Operator nor mapping ({symmetry!r}); give a quantity or {{old: new}}",
            argument="also",
        )
    old = [_arguments.qubit_number(qubit, n, f"old qubit of {name!r}", "also") for qubit in symmetry]
    new = [_arguments.qubit_number(qubit, n, f"new qubit of {name!r}", "also") for qubit in symmetry.values()]
    if sorted(old) != sorted(new):
        raise OperatorError(
            f"also: {name!r} does not permute qubits ({dict(symmetry)!r}); name each new qubit once, and among the old",
            argument="also",
        )
    return relabelling(name, "given relabelling", dict(zip(old, new, strict=True)), judged)
