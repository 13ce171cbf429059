"""Yoshida's solutions of the order conditions for symmetric compositions of Strang steps.

His tables print 15 digits, w_m outermost to w_1; the weight in the middle follows from the sum. That is not
enough for the correctly rounded floats. The solutions are isolated, so Newton's method on the order
conditions, started at the printed digits, gives as many more as wanted; 40 stand here.
"""

from __future__ import annotations

from trueturn.formulas.entry import Entry, mirrored

__all__ = ["ENTRIES"]

SOURCE = "H. Yoshida, 'Construction of higher order symplectic integrators', Phys. Lett. A 150, 262 (1990), "
POLISHED = "; from memory, digits beyond the printed 15 by Newton's method on the order conditions"

ENTRIES = (
    Entry(
        name="yoshida-6",
        order=6,
        source=SOURCE + "Table 1, solution A" + POLISHED,
        weights=mirrored(
            "0.7845136104775572638194976338663498757768",  # printed 0.784513610477560
            "0.2355732133593581336847931829785346016865",  # printed 0.235573213359357
            "-1.177679984178871006946415680964315734639",  # printed -1.17767998417887
            "1.315186320683911218884249728238862514352",
        ),
    ),
    Entry(
        name="yoshida-8",
        order=8,
        source=SOURCE + "Table 2, solution D" + POLISHED,
        weights=mirrored(
            "0.9148442462297915667487934898475096045181",  # printed 0.914844246229740
            "0.2536933365662113541461460206899420760977",  # printed 0.253693336566229
            "-1.444852236860605157694730657537390354956",  # printed -1.44485223686048
            "-0.1582406353680501752040667767597542477554",  # printed -0.158240635368243
            "1.938139137622525986579186487443641760954",  # printed 1.93813913762276
            "-1.960610232975310807607633376399663640792",  # printed -1.96061023297549
            "0.102799849391796440698115131601225862911",  # printed 0.102799849391985
            "1.708453070787281584668379362228977878047",
        ),
    ),
)
