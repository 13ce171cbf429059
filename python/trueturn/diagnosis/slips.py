"""A Clifford gate lost or wrong at one place: from there on every string is a turned one.

Read gate by gate, a circuit whose basis change was not undone right at place k is C R'' R', with R' the rotations
before k as they were meant, C the product of all Clifford gates, and R'' = C† R C the rest turned. So turning the
strings behind some place back by C must mend all totals at once.
"""

from __future__ import annotations

from collections.abc import Sequence

from trueturn.diagnosis.totals import Sheet
from trueturn.diagnosis.unfolding import Mask
from trueturn.rotations import Rotations

__all__ = ["slip_place", "turned_behind"]


def slip_place(rotations: Rotations, images: dict[Mask, tuple[Mask, float]], sheet: Sheet) -> int | None:
    """Find a place such that all totals are right once the strings from there on are turned back.

    Parameters
    ----------
    rotations : Rotations
        With Clifford gates moved to the end.
    images : dict
        What each string becomes when it is turned back, with its sign.
    sheet : Sheet
        Wanted totals, and what may be off.

    Returns
    -------
    int or None
        Number of the first rotation to turn back; the least one that fits.
    """
    listed = _listed(rotations)
    totals: dict[Mask, float] = {}
    for mask, angle in listed:
        image, sign = images[mask]
        totals[image] = totals.get(image, 0.0) + sign * angle
    strings = {*totals, *sheet.wanted, *images}
    limits = {mask: sheet.allowed(mask) for mask in strings}
    # sums are formed by adding and taking away, one rounding each
    slack = 2.0**-52 * len(listed) * max((abs(angle) for _, angle in listed), default=0.0)
    wrong = {mask for mask in strings if _off(totals, sheet, mask) > limits[mask] + slack}
    for place, (mask, angle) in enumerate(listed):
        if not wrong:
            return place
        image, sign = images[mask]
        totals[image] -= sign * angle
        totals[mask] = totals.get(mask, 0.0) + angle
        for one in (image, mask):
            (wrong.add if _off(totals, sheet, one) > limits[one] + slack else wrong.discard)(one)
    return None


def turned_behind(rotations: Rotations, images: dict[Mask, tuple[Mask, float]], place: int, phase: float) -> Rotations:
    """Turn the strings from a place on."""
    listed = _listed(rotations)
    behind = [(images[mask][0], images[mask][1] * angle) for mask, angle in listed[place:]]
    new = [*listed[:place], *behind]
    x, z = [mask[0] for mask, _ in new], [mask[1] for mask, _ in new]
    return Rotations(x, z, [angle for _, angle in new], rotations.qubits, phase)


def _listed(rotations: Rotations) -> Sequence[tuple[Mask, float]]:
    masks = zip(rotations.x_masks.tolist(), rotations.z_masks.tolist(), strict=True)
    return list(zip(masks, rotations.angles.tolist(), strict=True))


def _off(totals: dict[Mask, float], sheet: Sheet, mask: Mask) -> float:
    return abs(totals.get(mask, 0.0) - sheet.wanted.get(mask, 0.0))
