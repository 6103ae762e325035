"""The invented railway: its lines, and of what kind and size the sections on each are.

All names and codes are invented. One section's record is made in `tracks`.
"""

from __future__ import annotations

from dataclasses import dataclass

from service.rules.words import CircuitKind, Traction

DEPOT = "harrow-vale"
DEPOT_TITLE = "Harrow Vale signalling depot"
TIME_ZONE = "Europe/London"
BOOK = "harrow-vale-house"


@dataclass(frozen=True, slots=True)
class LineOf:
    """Some consecutive sections of one kind on one line.

    `yard_every`: one section in so many has points and stands in a yard; 0 for none.
    """

    prefix: str
    name: str
    kind: CircuitKind
    traction: Traction
    return_rails: int
    count: int
    shortest_m: int
    longest_m: int
    yard_every: int = 0


LINES = (
    LineOf("CB", "Coldbeck branch", CircuitKind.DC, Traction.NONE, 0, 62, 260, 1350, 7),
    LineOf("HM", "Harrow Vale main", CircuitKind.DC_AC_IMMUNE, Traction.AC_OVERHEAD, 1, 46, 180, 950, 8),
    LineOf("OS", "Ossery loop", CircuitKind.DC_AC_IMMUNE, Traction.NONE, 0, 10, 200, 700, 5),
    LineOf("LQ", "Linden Quay", CircuitKind.AC_SINGLE_RAIL, Traction.DC_THIRD_RAIL, 1, 26, 120, 700, 9),
    LineOf("PS", "Penna Sands", CircuitKind.AC_SINGLE_RAIL, Traction.DC_OVERHEAD, 1, 10, 120, 500, 5),
    LineOf(
        "TF", "Thornfield underline", CircuitKind.AC_DOUBLE_RAIL, Traction.DC_FOURTH_RAIL, 2, 18, 150, 700
    ),
    LineOf("DM", "Dunmere curve", CircuitKind.AC_DOUBLE_RAIL, Traction.DC_THIRD_RAIL, 2, 8, 300, 1000),
    LineOf("MP", "Marrow Point", CircuitKind.AUDIO_FREQUENCY, Traction.AC_OVERHEAD, 2, 26, 320, 900),
    LineOf("SW", "Saltwick spur", CircuitKind.AUDIO_FREQUENCY, Traction.NONE, 0, 6, 320, 800),
    LineOf("ER", "Ember Ridge", CircuitKind.IMPULSE, Traction.DC_OVERHEAD, 2, 8, 150, 450),
    LineOf("KF", "Kettle Fen", CircuitKind.IMPULSE, Traction.NONE, 0, 6, 150, 450),
    LineOf("WM", "Wether Moor", CircuitKind.CODED, Traction.NONE, 0, 14, 1400, 3200),
)
"""Some 240 sections of every circuit kind and every traction."""
