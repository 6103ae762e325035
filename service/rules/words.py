"""The closed and open sets of words that rules, tables and the wire share.

One enumeration a set; the values are the wire's spelling. Nothing is computed here except the
orders the words carry (gravity of verdicts, dryness of ballast). Reasons carry words of an open set.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


@dataclass(frozen=True, slots=True)
class Reason:
    """Why something is as it is: a stable code (an open set) and a sentence for a person."""

    code: str
    reason: str


class CircuitKind(StrEnum):
    DC = "dc"
    DC_AC_IMMUNE = "dc_ac_immune"
    AC_SINGLE_RAIL = "ac_single_rail"
    AC_DOUBLE_RAIL = "ac_double_rail"
    AUDIO_FREQUENCY = "audio_frequency"
    IMPULSE = "impulse"
    CODED = "coded"


class Traction(StrEnum):
    NONE = "none"
    DC_THIRD_RAIL = "dc_third_rail"
    DC_FOURTH_RAIL = "dc_fourth_rail"
    DC_OVERHEAD = "dc_overhead"
    AC_OVERHEAD = "ac_overhead"


class Place(StrEnum):
    BLOCK = "block"
    YARD = "yard"


class Sleepers(StrEnum):
    WOOD = "wood"
    CONCRETE = "concrete"
    STEEL = "steel"
    SLAB = "slab"


class SectionState(StrEnum):
    PLANNED = "planned"
    IN_USE = "in_use"
    OUT_OF_USE = "out_of_use"
    RECOVERED = "recovered"


class Bonding(StrEnum):
    SERIES = "series"
    PARALLEL = "parallel"
    MIXED = "mixed"


class Separation(StrEnum):
    JOINT = "joint"
    TUNED_ZONE = "tuned_zone"


class Stage(StrEnum):
    AS_FOUND = "as_found"
    AS_LEFT = "as_left"


class Comparison(StrEnum):
    EQ = "eq"
    GE = "ge"
    LT = "lt"


class Source(StrEnum):
    """What shunted the track while a residual was read."""

    SHUNT = "shunt"
    TRAIN = "train"


class Ballast(StrEnum):
    """Seen ballast wetness at a visit."""

    DRY = "dry"
    FROZEN = "frozen"
    DAMP = "damp"
    WET = "wet"
    FLOODED = "flooded"

    @property
    def wetness(self) -> int:
        """0 for the driest (dry, frozen) to 3 (flooded)."""
        return _WETNESS[self]


_WETNESS = {Ballast.DRY: 0, Ballast.FROZEN: 0, Ballast.DAMP: 1, Ballast.WET: 2, Ballast.FLOODED: 3}


class BallastState(StrEnum):
    CLEAN = "clean"
    FOULED = "fouled"
    OVERGROWN = "overgrown"


class Rail(StrEnum):
    CLEAN = "clean"
    RUSTY = "rusty"
    CONTAMINATED = "contaminated"


class TaskDone(StrEnum):
    DONE = "done"
    PARTLY = "partly"
    NOT_DONE = "not_done"


class Work(StrEnum):
    ADJUSTED = "adjusted"
    RELAY_CHANGED = "relay_changed"
    FEED_CHANGED = "feed_changed"
    BOND_CHANGED = "bond_changed"
    CABLE_CHANGED = "cable_changed"
    JOINT_CHANGED = "joint_changed"
    RERAILED = "rerailed"
    RAIL_CLEANED = "rail_cleaned"
    TAMPED = "tamped"
    BALLAST_CLEANED = "ballast_cleaned"
    DRAINED = "drained"
    CLEANED = "cleaned"


CIRCUIT_CHANGING_WORK = frozenset(
    {
        Work.ADJUSTED,
        Work.RELAY_CHANGED,
        Work.FEED_CHANGED,
        Work.BOND_CHANGED,
        Work.CABLE_CHANGED,
        Work.JOINT_CHANGED,
        Work.RERAILED,
    }
)
"""Work after which no earlier electrical reading proves anything."""


class ConditionLeft(StrEnum):
    FIT = "fit"
    RESTRICTED = "restricted"
    DISCONNECTED = "disconnected"


class CalibrationResult(StrEnum):
    PASS = "pass"
    ADJUSTED = "adjusted"
    """In tolerance as found, adjusted all the same."""
    OUT_OF_TOLERANCE = "out_of_tolerance"


class Hazard(StrEnum):
    WRONG_SIDE = "wrong_side"
    RIGHT_SIDE = "right_side"


class VerdictWord(StrEnum):
    """One limit against one section, in order of gravity."""

    OUTSIDE = "outside"
    UNPROVEN = "unproven"
    NOT_MEASURED = "not_measured"
    NEAR = "near"
    WITHIN = "within"

    @property
    def gravity(self) -> int:
        """0 for the gravest."""
        return _GRAVITY[self]


_GRAVITY = {word: gravity for gravity, word in enumerate(VerdictWord)}


class Compliance(StrEnum):
    NO = "no"
    NOT_SHOWN = "not_shown"
    YES = "yes"


class TaskState(StrEnum):
    OVERDUE = "overdue"
    DUE = "due"
    NEVER_DONE = "never_done"
    INCOMPLETE = "incomplete"
    CURRENT = "current"
    NO_INTERVAL = "no_interval"
    """The book names no interval: the depot must state its own."""
    NOT_OWED = "not_owed"


class FindingKind(StrEnum):
    OUTSIDE = "outside"
    FOUND_OUTSIDE = "found_outside"
    NOT_SHOWN = "not_shown"
    OVERDUE = "overdue"
    CONFIGURATION = "configuration"
    POOR_RAIL_CONTACT = "poor_rail_contact"
    CONCESSION_LAPSING = "concession_lapsing"
    DOUBTFUL = "doubtful"


class FindingState(StrEnum):
    NEW = "new"
    OPEN = "open"
    CLEARED = "cleared"


class EditionState(StrEnum):
    DRAFT = "draft"
    ISSUED = "issued"
    WITHDRAWN = "withdrawn"


class RelativeTo(StrEnum):
    """What a relative bound is a multiple of."""

    RELAY_PICK_UP = "relay_pick_up"
    RELAY_DROP_AWAY = "relay_drop_away"
    SET_UP = "set_up"
