"""Colour the edges of a graph so that edges of one colour share no vertex, with few colours.

First a palette of Δ colours, the largest degree, is tried: each edge takes the lowest colour free at both
ends, and when there is none, two colours are exchanged along the alternating (Kempe) path that starts at one
end. In a bipartite graph (chains, even rings, ladders, square lattices) that path never reaches the other
end, so Δ colours always do (König). Where the attempt fails, the method of Misra and Gries colours with Δ +
1, which Vizing's theorem promises. Deciding between the two is NP-complete in general, so no further search
is made.

References
----------
D. König, "Über Graphen und ihre Anwendung auf Determinantentheorie und Mengenlehre",
Math. Ann. 77, 453 (1916); J. Misra and D. Gries, "A constructive proof of Vizing's theorem", Inf. Process.
Lett. 41, 131 (1992). From memory.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

from trueturn.errors import InternalError

__all__ = ["colour_edges"]

Edge = tuple[int, int]


def colour_edges(edges: Sequence[Edge]) -> list[int]:
    """Give each edge a colour.

    Parameters
    ----------
    edges : sequence of (int, int)
        Distinct pairs of different vertices, in any numbering.

    Returns
    -------
    list of int
        The colour of each edge, numbered by first appearance; at most Δ + 1 of them, and Δ for bipartite
        graphs.

    Notes
    -----
    Deterministic; at most about (edges × vertices) steps.

    Examples
    --------
    >>> colour_edges([(0, 1), (1, 2), (2, 3)])
    [0, 1, 0]
    """
    degree: dict[int, int] = {}
    for u, v in edges:
        degree[u] = degree.get(u, 0) + 1
        degree[v] = degree.get(v, 0) + 1
    most = max(degree.values(), default=0)
    graph = _Colouring(degree, most)
    if not all(graph.add_by_kempe_path(u, v) for u, v in edges):
        graph = _Colouring(degree, most + 1)
        for u, v in edges:
            graph.add_by_fan(u, v)
    raw = [graph.colour(u, v) for u, v in edges]
    renumbered = {colour: number for number, colour in enumerate(dict.fromkeys(raw))}
    return [renumbered[colour] for colour in raw]


class _Colouring:
    """A partial colouring: for each vertex, the neighbour reached by each colour in use there."""

    def __init__(self, vertices: dict[int, int], colours: int) -> None:
        self.colours = range(colours)
        self.at: dict[int, dict[int, int]] = {vertex: {} for vertex in vertices}

    def colour(self, u: int, v: int) -> int:
        return next(colour for colour, neighbour in self.at[u].items() if neighbour == v)

    def free(self, vertex: int) -> list[int]:
        return [colour for colour in self.colours if colour not in self.at[vertex]]

    def paint(self, u: int, v: int, colour: int) -> None:
        self.at[u][colour] = v
        self.at[v][colour] = u

    def path(self, start: int, first: int, second: int) -> list[int]:
        """Vertices of the path from `start`, `first` then `second` in turn; `second` is free at `start`."""
        vertices = [start]
        colour, other = first, second
        while (following := self.at[vertices[-1]].get(colour)) is not None:
            vertices.append(following)
            colour, other = other, colour
        return vertices

    def exchange(self, vertices: list[int], first: int, second: int) -> None:
        """Exchange two colours along a path as given by `path`."""
        steps = list(pairwise(vertices))
        for number, (u, v) in enumerate(steps):
            colour = second if number % 2 else first
            del self.at[u][colour], self.at[v][colour]
        for number, (u, v) in enumerate(steps):
            self.paint(u, v, first if number % 2 else second)

    def add_by_kempe_path(self, u: int, v: int) -> bool:
        """Colour a new edge, exchanging two colours along one path if need be; False where none helps."""
        at_u, at_v = self.free(u), self.free(v)
        for colour in at_u:
            if colour in at_v:
                self.paint(u, v, colour)
                return True
        for wanted in at_u:
            for spare in at_v:
                path = self.path(v, wanted, spare)
                if path[-1] != u:
                    self.exchange(path, wanted, spare)
                    self.paint(u, v, wanted)
                    return True
        return False

    def add_by_fan(self, u: int, v: int) -> None:
        """Colour a new edge by the method of Misra and Gries; needs a colour free at every vertex."""
        fan = [v]
        extended = True
        while extended:
            extended = False
            for colour, neighbour in self.at[u].items():
                if neighbour not in fan and colour not in self.at[fan[-1]]:
                    fan.append(neighbour)
                    extended = True
                    break
        at_centre, at_end = self.free(u)[0], self.free(fan[-1])[0]
        if at_centre != at_end:
            self.exchange(self.path(u, at_end, at_centre), at_end, at_centre)
        for last, vertex in enumerate(fan):
            if last and self.colour(u, vertex) in self.at[fan[last - 1]]:
                break  # the exchange ended the fan before this vertex
            if at_end not in self.at[vertex]:
                self._rotate(u, fan[: last + 1], at_end)
                return
        raise InternalError(f"edge colouring: the fan at vertex {u} cannot be closed; please report this")

    def _rotate(self, u: int, fan: list[int], colour: int) -> None:
        shifted = [self.colour(u, vertex) for vertex in fan[1:]]
        for vertex, old in zip(fan[1:], shifted, strict=True):
            del self.at[u][old], self.at[vertex][old]
        for vertex, new in zip(fan, [*shifted, colour], strict=True):
            self.paint(u, vertex, new)
