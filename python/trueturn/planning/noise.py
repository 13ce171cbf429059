"""What failing two-qubit gates may add to the error of observables, and the refusal of tolerances within that.

Model (`trueturn.device.shares`): each two-qubit gate in the causal cone of an observable fails with one probability,
independently, and a failure may do anything. Then no expectation moves by more than W times the probability that some gate
of the cone fails, W being twice a bound on the norm. Proven under the model; the true effect can be smaller.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

from trueturn.audit.figures import count, plain, upper
from trueturn.audit.measure import Bench
from trueturn.device.counting import visible_gates
from trueturn.device.shares import gate_share
from trueturn.errors import ToleranceError
from trueturn.export.hardware import Hardware
from trueturn.planning.ways import Way
from trueturn.rotations import Rotations

__all__ = ["Noise"]


class Noise(NamedTuple):
    """The failing gates of a device, as far as observables on a bench see them."""

    bench: Bench
    hardware: Hardware

    def of(self, circuit: Rotations) -> float:
        """Return the largest share of failing gates in the error of any observable."""
        rate = self.hardware.two_qubit_error or 0.0
        largest = 0.0
        for name, observable in self.bench.observables.items():
            width = 2.0 if self.bench.relative_to == "norm" else 2.0 * self.bench.norms[name]
            largest = max(largest, width * gate_share(visible_gates(circuit, observable, self.hardware), rate))
        return largest

    def require_room(self, ways: Sequence[Way], tolerance: float) -> None:
        """Refuse a tolerance below what failing gates may add at the fewest steps of every way: more steps only add gates.

        Raises
        ------
        ToleranceError
        """
        unit, time = self.bench.step_unit(), self.bench.times[-1]
        shares = [self.of(way.candidate.formula.rotations(way.partition, time, unit)) for way in ways]
        least = min(shares)
        if least < tolerance:
            return
        label = ways[shares.index(least)].label
        raise ToleranceError(
            f"tolerance: lies within the device's noise ({plain(tolerance)}): already with {count(unit)} "
            f"step{'' if unit == 1 else 's'} of {label} failing gates may add {upper(least)}, and more steps have more "
            "gates; ask for more, or give a lower two_qubit_error",
            tolerance=tolerance,
            achievable=least,
        )
