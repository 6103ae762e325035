"""Every quantity the service knows, its base unit, and the only unit conversions there are.

Units are UCUM codes. Conversion is decimal and rounds once, so 700 mOhm is 0.7 Ohm to the last bit.
"""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from functools import lru_cache
from types import MappingProxyType

UNITS = MappingProxyType(
    {
        "Ohm": ("Ohm", Decimal(1)),
        "mOhm": ("Ohm", Decimal("0.001")),
        "kOhm": ("Ohm", Decimal(1000)),
        "MOhm": ("Ohm", Decimal(1000000)),
        "Ohm.km": ("Ohm.km", Decimal(1)),
        "V": ("V", Decimal(1)),
        "mV": ("V", Decimal("0.001")),
        "A": ("A", Decimal(1)),
        "mA": ("A", Decimal("0.001")),
        "deg": ("deg", Decimal(1)),
        "Cel": ("Cel", Decimal(1)),
        "Hz": ("Hz", Decimal(1)),
        "%": ("%", Decimal(1)),
        "m": ("m", Decimal(1)),
        "1": ("1", Decimal(1)),
    }
)
"""UCUM code → (base unit, factor)."""


@dataclass(frozen=True, slots=True)
class Quantity:
    """One quantity: its wire name, base unit and the values that cannot be.

    `from_register` marks what is judged from the section's record, never from a reading;
    `shunt` what is measured with a resistance across the rails; `steps_up` says which way a
    stepped box leaves the true value (+1 above the reading, −1 below, 0 no box). `of_item` marks
    what is measured on an item or a cable, so that work on the track leaves it standing.
    """

    quantity: str
    title: str
    unit: str
    lowest: float
    highest: float
    from_register: bool = False
    wetness_matters: bool = False
    needs_shunt: bool = False
    steps_up: int = 0
    of_item: bool = False


def _quantities() -> tuple[Quantity, ...]:
    volts, amps = (0.0, 1000.0), (0.0, 1000.0)
    return (
        Quantity("drop_shunt", "Drop shunt", "Ohm", 0.0, 1e4, wetness_matters=True, steps_up=1),
        Quantity("pick_up_shunt", "Pick-up shunt", "Ohm", 0.0, 1e4, steps_up=-1),
        Quantity("residual_voltage", "Residual voltage", "V", *volts, wetness_matters=True, needs_shunt=True),
        Quantity("residual_current", "Residual current", "A", *amps, wetness_matters=True, needs_shunt=True),
        Quantity("relay_voltage", "Relay voltage", "V", *volts),
        Quantity("relay_current", "Relay current", "A", *amps),
        Quantity("rail_voltage", "Voltage across the rails", "V", *volts),
        Quantity("rail_current", "Current into or out of the rails", "A", *amps),
        Quantity("supply_voltage", "Supply voltage", "V", *volts),
        Quantity("feed_voltage", "Feed set voltage", "V", *volts),
        Quantity("feed_current", "Feed current", "A", *amps),
        Quantity("local_voltage", "Local winding voltage", "V", *volts),
        Quantity("phase_angle", "Angle between control and local", "deg", -180.0, 180.0),
        Quantity("relay_pick_up_voltage", "Relay pick-up voltage", "V", *volts, of_item=True),
        Quantity("relay_drop_away_voltage", "Relay drop-away voltage", "V", *volts, of_item=True),
        Quantity("relay_pick_up_current", "Relay pick-up current", "A", *amps, of_item=True),
        Quantity("relay_drop_away_current", "Relay drop-away current", "A", *amps, of_item=True),
        Quantity("ballast_resistance", "Ballast resistance", "Ohm.km", 0.0, 1e5),
        Quantity("insulation_resistance", "Insulation resistance", "Ohm", 0.0, 1e12, of_item=True),
        Quantity("joint_resistance", "Insulated joint resistance", "Ohm", 0.0, 1e9),
        Quantity("bond_resistance", "Bond resistance", "Ohm", 0.0, 1e4),
        Quantity("feed_resistance", "Feed resistance", "Ohm", 0.0, 1e4),
        Quantity("stray_voltage", "Stray voltage", "V", *volts),
        Quantity("stray_current", "Stray current", "A", *amps),
        Quantity("rail_to_earth_voltage", "Rail to earth voltage", "V", *volts),
        Quantity("rail_drop_left", "Voltage drop along the left rail", "V", -100.0, 100.0),
        Quantity("rail_drop_right", "Voltage drop along the right rail", "V", -100.0, 100.0),
        Quantity("traction_imbalance", "Traction current imbalance", "%", 0.0, 100.0),
        Quantity("frequency", "Frequency", "Hz", 0.0, 1e5),
        Quantity("length", "Length", "m", 0.0, 1e5, from_register=True),
        Quantity("points_ends", "Point ends", "1", 0.0, 100.0, from_register=True),
        Quantity("insulated_joints", "Insulated joints", "1", 0.0, 1000.0, from_register=True),
        Quantity(
            "parallel_bonded_length", "Longest parallel-bonded length", "m", 0.0, 1e5, from_register=True
        ),
        Quantity("interrupter", "Interrupter fitted where required", "1", 0.0, 1.0, from_register=True),
        Quantity("bonds_duplicated", "Parallel bonds duplicated", "1", 0.0, 1.0, from_register=True),
        Quantity("circuit_kind_permitted", "Circuit kind permitted", "1", 0.0, 1.0, from_register=True),
        Quantity("adjacent_opposed", "Neighbours opposed", "1", 0.0, 1.0, from_register=True),
    )


QUANTITIES = MappingProxyType({quantity.quantity: quantity for quantity in _quantities()})


def exact(value: float) -> Decimal:
    """The shortest decimal that reads back as `value`: what a person wrote or would read.

    >>> exact(0.1)
    Decimal('0.1')
    """
    return Decimal(repr(value))


@lru_cache(maxsize=1 << 14)
def difference(a: float, b: float) -> float:
    """`a − b` in decimal, rounded once.

    >>> 0.6 - 0.5
    0.09999999999999998
    >>> difference(0.6, 0.5)
    0.1
    """
    return float(exact(a) - exact(b))


@lru_cache(maxsize=1 << 14)
def total(a: float, b: float) -> float:
    """`a + b` in decimal, rounded once.

    >>> total(0.1, 0.2)
    0.3
    """
    return float(exact(a) + exact(b))


def product(a: float, b: float) -> float:
    """`a · b` in decimal, rounded once.

    >>> product(1.25, 1.4)
    1.75
    """
    return float(exact(a) * exact(b))


def to_base(value: float, unit: str) -> float:
    """Convert `value` from `unit` to that unit's base unit.

    Raises
    ------
    KeyError
        If `unit` is not a known UCUM code.

    >>> to_base(700, "mOhm")
    0.7
    """
    return float(Decimal(repr(value)) * UNITS[unit][1])


def base_unit(unit: str) -> str:
    """The base unit of a UCUM code; KeyError if it is unknown.

    >>> base_unit("kOhm")
    'Ohm'
    """
    return UNITS[unit][0]
