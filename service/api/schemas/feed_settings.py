"""Settings of a feed and longest circuits on the wire.

What all calculations share is in `circuits`.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import ConfigDict, Field, RootModel, model_validator

from service.api.schemas.base import Answer, Request
from service.api.schemas.circuits import (
    PLAIN_EXAMPLE,
    AskedWithSpread,
    Metre,
    OhmKm,
    Share,
    SomeOhm,
    Stated,
    number,
    number_or_null,
)
from service.api.schemas.examples import shown

if TYPE_CHECKING:
    from service.application.circuits import Registered
    from service.application.feed_settings import Adjustment, Settings, Step, Window
    from service.electrical.longest import Longest
    from service.electrical.setting import Requirements

Adjusted = Literal["feed_ohm", "emf_v", "feed_ratio"]
Value = Annotated[float, Field(ge=0, le=1e6)]
Multiple = Annotated[float, Field(ge=0.1, le=100)]

_REQUIREMENTS: dict[str, Any] = {
    "least_pick_up": 1.1,
    "minimum_shunt_ohm": 0.5,
    "residual_share": 0.85,
    "most_pick_up": None,
    "wet_ohm_km": 3,
    "dry_ohm_km": None,
}


class RequirementsSent(Request):
    """What must hold in any ballast from wet to dry.

    With no train the relay has at least `least_pick_up` and at most `most_pick_up` (null: no bound) times
    its pick-up; the minimum shunt at the worst place leaves at most `residual_share` of its drop-away.
    For a registered section ballast and shunt not stated are those of its record and limit book; else
    `dry_ohm_km` null is infinite.
    """

    least_pick_up: Multiple
    minimum_shunt_ohm: SomeOhm | None = None
    residual_share: Share
    most_pick_up: Multiple | None = None
    wet_ohm_km: OhmKm | None = None
    dry_ohm_km: OhmKm | None = None


class AdjustmentSent(Request):
    """What may be adjusted: between the ends of a range, or at steps alone.

    `feed_ohm` is the feed's series resistance, of a registered section its adjustable part; `emf_v` its emf;
    `feed_ratio` the ratio of its transformer.
    """

    adjust: Adjusted
    range: tuple[Value, Value] | None = None
    steps: Annotated[list[Value], Field(min_length=2, max_length=200)] | None = None

    @model_validator(mode="after")
    def _one_of_both(self) -> AdjustmentSent:
        if (self.range is None) is (self.steps is None):
            raise ValueError("give a range or steps")
        return self

    def adjustment(self, registered: Registered | None) -> Adjustment:
        """What is asked of the application."""
        from service.application.feed_settings import Adjustment, fixed_ohm

        steps = tuple(sorted(set(self.steps or ())))
        low, high = self.range or (steps[0], steps[-1])
        fixed = fixed_ohm(registered) if registered is not None and self.adjust == "feed_ohm" else 0.0
        return Adjustment(self.adjust, low, high, steps, fixed_ohm=fixed)


class AskedToSet(AskedWithSpread):
    """A circuit and its requirements; its own ballast is left aside."""

    requirements: RequirementsSent
    adjustment: AdjustmentSent | None = None


class SettingSent(AskedToSet):
    """A circuit, its requirements and what may be adjusted; a registered section's is known."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "circuit": PLAIN_EXAMPLE,
                    "requirements": _REQUIREMENTS,
                    "adjustment": {"adjust": "feed_ohm", "range": [1, 30]},
                }
            ]
        }
    )


class LongestSent(AskedToSet):
    """A circuit whose own length is left aside, and its requirements; without adjustment its feed is kept."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [{"circuit": PLAIN_EXAMPLE, "requirements": _REQUIREMENTS, "upto_m": 3000}]
        }
    )

    upto_m: Metre


class MarginsAnswer(Answer):
    """Margin on each requirement; negative is not met, null that it cannot be met at all.

    `pick_up` and `excitation` are shares of their bounds, `shunt` is (R - Rmin)/(R + Rmin) for the drop
    shunt R at the residual share.
    """

    pick_up: float | None
    shunt: float | None
    excitation: float | None


class StepAnswer(Answer):
    """One step of a resistor, or one tap; it serves where no margin is negative."""

    value: float
    serves: bool
    margins: MarginsAnswer


class WindowAnswer(Answer):
    """Settings that meet every requirement, null where none does, and what binds each edge."""

    window: tuple[float, float] | None
    binds: tuple[str, str] | None


class SettingValues(WindowAnswer):
    """The window, the best-centred setting in it or outside, and the margins there.

    `opens` where there is no window: the best margin of each requirement while the others are met, null
    where easing it alone opens none. `steps`: those asked for, or on either side of the best setting.
    """

    best: float
    margins: MarginsAnswer
    opens: MarginsAnswer | None
    steps: list[StepAnswer]


class SettingAnswer(SettingValues, Stated):
    """Settings of a circuit as it stands."""

    adjust: Adjusted


class SettingCasesAnswer(Stated):
    """Nominal; worst_case: pick-up held to the clear case, the rest to the occupied one."""

    adjust: Adjusted
    nominal: SettingValues
    worst_case: WindowAnswer


class SettingReply(RootModel[SettingAnswer | SettingCasesAnswer]):
    """As it stands, or with its worst case beside it."""

    model_config = ConfigDict(json_schema_extra=shown("setting"))


class LongestValues(Answer):
    """The longest circuit, and the requirement that binds it; `range` where none does."""

    length_m: float
    binds: str


class LongestAnswer(LongestValues, Stated):
    """The longest circuit with values as they stand."""


class LongestCasesAnswer(Stated):
    """Nominal; worst_case is null where the feed is adjusted for each length."""

    nominal: LongestValues
    worst_case: LongestValues | None


class LongestReply(RootModel[LongestAnswer | LongestCasesAnswer]):
    """As it stands, or with its worst case beside it."""

    model_config = ConfigDict(json_schema_extra=shown("longest"))


def setting_values(found: Settings) -> SettingValues:
    """From the application's value."""
    nominal = found.nominal
    return SettingValues(
        window=nominal.window,
        binds=nominal.binds,
        best=number(nominal.best),
        margins=_margins(nominal.margins),
        opens=_margins(nominal.opens) if nominal.opens else None,
        steps=[_step(step) for step in found.steps],
    )


def window_answer(window: Window) -> WindowAnswer:
    """From the application's value."""
    return WindowAnswer(window=window.window, binds=window.binds)


def longest_values(found: Longest) -> LongestValues:
    """From the model's value."""
    return LongestValues(length_m=number(found.length_m), binds=found.binds)


def requirements(sent: RequirementsSent, wet: float, dry: float, minimum_shunt_ohm: float) -> Requirements:
    """What is asked of the application; NotAcceptableError with a pointer for what cannot be asked."""
    from service.application.circuit_cases import pointed
    from service.electrical.setting import Requirements

    with pointed("/requirements"):
        return Requirements(
            sent.least_pick_up,
            minimum_shunt_ohm,
            sent.residual_share,
            math.inf if sent.most_pick_up is None else sent.most_pick_up,
            wet,
            dry,
        )


def _step(step: Step) -> StepAnswer:
    serves = min(step.margins.values()) >= 0
    return StepAnswer(value=step.value, serves=serves, margins=_margins(step.margins))


def _margins(margins: dict[Literal["pick_up", "shunt", "excitation"], float]) -> MarginsAnswer:
    return MarginsAnswer.model_validate({name: number_or_null(value) for name, value in margins.items()})
