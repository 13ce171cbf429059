"""Electrons in orbitals: integrals, their Hamiltonian in fermions, and encodings of fermions in qubits.

`read_fcidump` goes from a file to an `Operator` in one call. `read_integrals` stops half-way, at `Integrals`, which know
their active space, their Hamiltonian in any encoding, and their start determinant. `encode` takes any operator that was
made by the Jordan-Wigner transformation, such as a Hubbard model, to another encoding.
"""

from trueturn.chemistry.encodings import ENCODINGS, encode
from trueturn.chemistry.fcidump import read_fcidump, read_integrals
from trueturn.chemistry.integrals import Integrals

__all__ = ["ENCODINGS", "Integrals", "encode", "read_fcidump", "read_integrals"]
