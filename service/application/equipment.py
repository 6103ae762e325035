"""The typed equipment of each circuit kind, as it stands on the wire and, as JSON text, in the register.

The one place where a wire schema and what is kept are the same type. Every member but the circuit kind
may be absent: the register may be silent. Impedances are [resistance, reactance] at the frequency of
the circuit. What the rules take from it is in `section_records`, electrical circuits in `circuits`.
"""

from __future__ import annotations

from datetime import date
from typing import Annotated, Any, Literal

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    StringConstraints,
    TypeAdapter,
    field_validator,
)

TEST_POINT_PATTERN = r"^(feed_end|relay_end|middle|leg:[A-Za-z0-9._()-]{1,40})$"
TestPoint = Annotated[str, StringConstraints(pattern=TEST_POINT_PATTERN)]
Text = Annotated[str, StringConstraints(pattern=r"^[^\x00-\x1f\x7f]{1,80}$")]
Volts = Annotated[float, Field(ge=0, le=10_000)]
Amps = Annotated[float, Field(ge=0, le=10_000)]
Ohms = Annotated[float, Field(ge=0, le=1e6)]
Hertz = Annotated[float, Field(gt=0, le=1e5)]
Metres = Annotated[float, Field(ge=0, le=1e5)]
OhmKm = Annotated[float, Field(gt=0, le=1e6)]
Ratio = Annotated[float, Field(gt=0, le=1e4)]
Impedance = tuple[Ohms, Annotated[float, Field(ge=-1e6, le=1e6)]]
SchemaNumber = Annotated[Literal[1], BeforeValidator(lambda given: 1 if given is None else given)]
"""The form of the text that is kept; not stated, it is the newest."""


class Part(BaseModel):
    """What every piece of equipment shares."""

    model_config = ConfigDict(
        extra="forbid",
        strict=True,
        allow_inf_nan=False,
        frozen=True,
        validate_by_name=True,
        serialize_by_alias=True,
    )


class Item(Part):
    """A piece with a serial number that tasks may run with."""

    type: Text | None = None
    serial: Text | None = None
    fitted_on: date | None = None
    tested_on: date | None = None
    """Last bench test before fitting."""
    overhauled_on: date | None = None


class Feed(Item):
    """The source: `emf_v` behind `series_ohm` (transformer, cable) and an adjustable resistance."""

    emf_v: Volts | None = None
    emf_low_v: Volts | None = None
    emf_high_v: Volts | None = None
    taps_v: Annotated[tuple[Volts, ...], Field(min_length=1, max_length=100)] | None = None
    """The values `emf_v` may be set to, where it is set by taps."""
    series_ohm: Impedance | None = None
    adjustable_ohm: Ohms | None = None
    """As set now, beside `series_ohm`."""
    adjustable_from_ohm: Ohms | None = None
    adjustable_to_ohm: Ohms | None = None
    adjustable_step_ohm: Ohms | None = None


class Line(Part):
    """The rails: impedance of the loop of both, with its range over temperature and bonding."""

    rail_type: Text | None = None
    loop_ohm_per_km: Impedance | None = None
    loop_low_ohm_per_km: Impedance | None = None
    loop_high_ohm_per_km: Impedance | None = None


class Bonds(Part):
    """Rail bonds, and what one of them measures when sound."""

    type: Text | None = None
    resistance_ohm: Ohms | None = None


class ImpedanceBond(Part):
    """An impedance bond across the rails, at the frequency of the circuit."""

    type: Text | None = None
    serial: Text | None = None
    impedance_ohm: Impedance | None = None
    resonated: bool | None = None
    turns: Annotated[int, Field(ge=1, le=10_000)] | None = None
    rated_rail_a: Amps | None = None


class Relay(Item):
    """A relay or receiver: type data (`rated`) and its own bench test, both at its terminals."""

    rated_pick_up_v: Volts | None = None
    rated_drop_away_v: Volts | None = None
    rated_pick_up_a: Amps | None = None
    rated_drop_away_a: Amps | None = None
    bench_pick_up_v: Volts | None = None
    bench_drop_away_v: Volts | None = None
    bench_pick_up_a: Amps | None = None
    bench_drop_away_a: Amps | None = None
    impedance_ohm: Impedance | None = None
    series_ohm: Impedance | None = None
    """Cable, choke or regulator between the rails and the relay."""
    cable: Text | None = None


class ImmuneRelay(Relay):
    """A relay proof against traction current up to a voltage at its terminals."""

    immunity_v: Volts | None = None


class VaneRelay(ImmuneRelay):
    """A relay with a local winding; other AC relays leave these members out."""

    local_v: Volts | None = None
    local_angle_deg: Annotated[float, Field(ge=-180, le=180)] | None = None
    """Lead of the local voltage over the feed's emf."""
    rated_local_v: Volts | None = None
    ideal_angle_deg: Annotated[float, Field(ge=-180, le=180)] | None = None
    """Lead of control over local at which the torque is greatest."""


class SetUp(Part):
    """One reference value from commissioning or the last full set-up, in the quantity's base unit."""

    quantity: Annotated[str, StringConstraints(pattern=r"^[a-z_]{1,40}$")]
    test_point: TestPoint
    value: Annotated[float, Field(ge=-1e12, le=1e12)]


class Common(Part):
    """What the equipment of every circuit kind has."""

    schema_: SchemaNumber = Field(1, alias="schema")
    feed: Feed | None = None
    line: Line | None = None
    bonds: Bonds | None = None
    receivers: Annotated[int, Field(ge=0, le=20)] | None = None
    """How many relays or receivers watch the section."""
    choke: bool | None = None
    catenary_current_a: Amps | None = None
    ballast_wet_ohm_km: OhmKm | None = None
    ballast_dry_ohm_km: OhmKm | None = None
    set_up_on: date | None = None
    set_up: Annotated[tuple[SetUp, ...], Field(min_length=1, max_length=100)] | None = None

    @field_validator(
        "feed", "line", "bonds", "relay", "feed_bond", "relay_bond", mode="after", check_fields=False
    )
    @classmethod
    def _null_if_silent(cls, part: Part | None) -> Part | None:
        """A part of which nothing is stated is kept, and answered, as null."""
        return part if part is not None and part.model_dump(exclude_none=True) else None


class DcEquipment(Common):
    circuit_kind: Literal["dc"]
    relay: Relay | None = None


class DcAcImmuneEquipment(Common):
    circuit_kind: Literal["dc_ac_immune"]
    relay: ImmuneRelay | None = None


class AcSingleRailEquipment(Common):
    circuit_kind: Literal["ac_single_rail"]
    frequency_hz: Hertz | None = None
    relay: VaneRelay | None = None


class AcDoubleRailEquipment(Common):
    """Ratios are feed-side turns to relay-side turns: over 1 the voltage is stepped down."""

    circuit_kind: Literal["ac_double_rail"]
    frequency_hz: Hertz | None = None
    feed_transformer_ratio: Ratio | None = None
    relay_transformer_ratio: Ratio | None = None
    feed_bond: ImpedanceBond | None = None
    relay_bond: ImpedanceBond | None = None
    relay: VaneRelay | None = None


class AudioFrequencyEquipment(Common):
    """`relay` is the receiver; its thresholds are its pick-up and drop-away voltages."""

    circuit_kind: Literal["audio_frequency"]
    frequency_hz: Hertz | None = None
    feed_tuned_zone_m: Metres | None = None
    relay_tuned_zone_m: Metres | None = None
    relay: ImmuneRelay | None = None


class ImpulseEquipment(Common):
    """`feed` is the transmitter, whose loop resistance decides the test shunt."""

    circuit_kind: Literal["impulse"]
    transmitter_loop_ohm: Ohms | None = None
    impulse_v: Volts | None = None
    relay: Relay | None = None


class CodedEquipment(Common):
    circuit_kind: Literal["coded"]
    frequency_hz: Hertz | None = None
    code: Text | None = None
    relay: Relay | None = None


Kinds = (
    DcEquipment
    | DcAcImmuneEquipment
    | AcSingleRailEquipment
    | AcDoubleRailEquipment
    | AudioFrequencyEquipment
    | ImpulseEquipment
    | CodedEquipment
)
Equipment = Annotated[Kinds, Field(discriminator="circuit_kind")]
"""Equipment of one section; `circuit_kind` must be the section's own."""

_equipment: TypeAdapter[Any] = TypeAdapter(Equipment)


def to_text(equipment: Common) -> str:
    """The text that is kept: what is not stated is left out."""
    return equipment.model_dump_json(exclude_none=True)


def of_text(text: str) -> Any:
    """The equipment that a kept text says."""
    return _equipment.validate_json(text)
