"""Where qubits start on a device: a search for places where those that interact are close.

With w(a, b) the number of rotations whose ladder has the rung a - b, and D the number of edges between two places, the
search lowers Σ w(a, b) (D(a, b) - 1): qubits are placed one by one, the one with most rungs to those placed at the
place that adds least; then pairs are exchanged, and qubits moved to free places, while that helps. The same input gives
the same layout. It is a heuristic: the least sum is hard to find, and the sum itself only guides the number of gates.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components, shortest_path

from trueturn import _native
from trueturn.errors import ArgumentError
from trueturn.export.connectivity import Edges
from trueturn.rotations import Rotations

__all__ = ["searched_layout"]

MOST_PLACES = 2048
MOST_SWEEPS = 20

Matrix = npt.NDArray[np.float64]


def searched_layout(circuit: Rotations, count: int, edges: Edges) -> tuple[int, ...]:
    """Return a start layout for a circuit: entry q is the physical qubit that holds qubit q.

    Parameters
    ----------
    circuit : Rotations
    count : int
        Physical qubits, at most 2048.
    edges : tuple of (int, int)

    Raises
    ------
    ArgumentError
        The device is too large to search, or no connected part of it holds the circuit.
    """
    if count > MOST_PLACES:
        raise ArgumentError(
            f"layout: the device is too large to search ({count} qubits); give a layout, or a part of the device with "
            f"at most {MOST_PLACES} qubits",
            argument="layout",
            value="search",
        )
    ends = np.array(edges, dtype=np.int64).reshape(-1, 2)
    graph = coo_array((np.ones(len(ends)), (ends[:, 0], ends[:, 1])), shape=(count, count)).tocsr()
    _, part_of = connected_components(graph, directed=False)
    places = np.flatnonzero(part_of == np.bincount(part_of).argmax())
    if len(places) < circuit.qubits:
        raise ArgumentError(
            f"connectivity: disconnected (its largest part has {len(places)} qubits, the circuit {circuit.qubits}); add edges",
            argument="connectivity",
            value=edges,
        )
    if circuit.qubits == 0:
        return ()
    weights = np.array(_native.rung_counts(circuit._circuit)).reshape(circuit.qubits, circuit.qubits)
    lengths: Matrix = shortest_path(graph[places][:, places], directed=False, unweighted=True)
    distances = np.maximum(lengths - 1.0, 0.0)
    layout = _improved(_greedy(weights, distances), weights, distances)
    return tuple(int(places[place]) for place in layout)


def _greedy(weights: Matrix, distances: Matrix) -> list[int]:
    qubits = len(weights)
    layout = [0] * qubits
    free = np.ones(len(distances), dtype=bool)
    waiting = np.ones(qubits, dtype=bool)
    towards = 1e-9 * weights.sum(axis=1)  # ties go to the qubit with most rungs
    centre = 1e-9 * distances.sum(axis=1)  # and to the most central place
    for _ in range(qubits):
        qubit = int(np.where(waiting, towards, -np.inf).argmax())
        placed = np.flatnonzero(~waiting)
        added = centre + distances[:, [layout[other] for other in placed]] @ weights[qubit, placed]
        layout[qubit] = int(np.where(free, added, np.inf).argmin())
        free[layout[qubit]] = False
        waiting[qubit] = False
        towards = towards + weights[qubit]
    return layout


def _improved(layout: list[int], weights: Matrix, distances: Matrix) -> list[int]:
    """Exchange a qubit with another, or move it to a free place, while the sum falls."""
    qubits = len(layout)
    taken = set(layout)
    places = np.array(layout + [place for place in range(len(distances)) if place not in taken])
    least = 1e-9 * max(1.0, float(weights.max()))
    for _ in range(MOST_SWEEPS):
        moved = False
        for one in range(qubits):
            apart = distances[np.ix_(places, places[:qubits])]
            now = np.einsum("ij,ij->i", weights, apart[:qubits])
            change = apart @ weights[one] - now[one]  # `one` at every other place, all else where it is
            # The other at the place of `one`; the rung between the two keeps its length and was counted away twice.
            change[:qubits] += weights @ apart[one] - now + 2.0 * weights[one] * apart[one]
            other = int(change.argmin())
            if change[other] < -least:
                places[[one, other]] = places[[other, one]]
                moved = True
        if not moved:
            break
    return [int(place) for place in places[:qubits]]
