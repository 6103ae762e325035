"""Calculations: what a circuit would do, by the electrical models. Nothing is kept.

The models are imported where they are asked for: the service starts, and mostly runs, without NumPy.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated, Any

from fastapi import APIRouter, Depends, Request
from starlette.responses import Response

from service.api.answers import answer
from service.api.deps import Caller, body_of, needs, service_of
from service.api.schemas import (
    ballast_estimates,
    bonding_proofs,
    calculations,
    feed_settings,
    traction_currents,
)
from service.api.schemas.ballast_estimates import BallastAnswer, BallastSent
from service.api.schemas.bonding_proofs import ProofAnswer, ProofSent
from service.api.schemas.calculations import (
    LimitsAnswer,
    LimitsCasesAnswer,
    LimitsReply,
    LimitsSent,
    PointAnswer,
    PointCasesAnswer,
    PointReply,
    PointSent,
    SeasonAnswer,
    SeasonCasesAnswer,
    SeasonReply,
    SeasonSent,
)
from service.api.schemas.circuits import CAUTION, SURFACE_CAUTION, Asked, AskedWithSpread
from service.api.schemas.feed_settings import (
    AskedToSet,
    LongestAnswer,
    LongestCasesAnswer,
    LongestReply,
    LongestSent,
    SettingAnswer,
    SettingCasesAnswer,
    SettingReply,
    SettingSent,
)
from service.api.schemas.traction_currents import (
    BalanceAnswer,
    BalanceSent,
    InterferenceAnswer,
    InterferenceCasesAnswer,
    InterferenceReply,
    InterferenceSent,
)
from service.errors import NotFoundError

if TYPE_CHECKING:
    from service.application.circuit_cases import Cases
    from service.application.circuits import Registered
    from service.electrical.setting import Requirements

router = APIRouter(
    prefix="/v1/calculations",
    tags=["calculations"],
    responses={404: {"description": "A section that is named in the body"}},
)

Reader = Annotated[Caller, Depends(needs("read"))]


@dataclass(frozen=True, slots=True)
class _Found:
    """The circuit that a calculation is about."""

    cases: Cases
    registered: Registered | None
    depot: str | None
    section: str | None

    def stated(self, caution: str = CAUTION) -> dict[str, Any]:
        """What every answer states."""
        return {
            "depot": self.depot,
            "section": self.section,
            "model": self.cases.model,
            "assumptions": list(self.cases.assumptions),
            "caution": caution,
        }


def _find(request: Request, caller: Caller, asked: Asked) -> _Found:
    """The circuit that was sent, or the one of the section that was named."""
    from service.application import circuit_cases, circuits

    wandering = asked.wandering() if isinstance(asked, AskedWithSpread) else None
    if asked.circuit is not None:
        return _Found(circuit_cases.plain(asked.circuit.circuit(), wandering), None, None, None)
    assert asked.depot is not None
    assert asked.section is not None
    _refuse_other_depots(caller, asked.depot)
    service = service_of(request)
    with service.read() as connection:
        found = circuits.of_section(connection, asked.depot, asked.section, service.clock(), wandering)
    return _Found(found.cases, found, asked.depot, asked.section)


def _refuse_other_depots(caller: Caller, depot: str) -> None:
    """NotFoundError for a depot that the key is not good for."""
    if caller.depot not in (None, depot):
        raise NotFoundError("There is no such depot.")


@router.post("/operating-point", response_model=PointReply)
def calculate_operating_point(
    request: Request, caller: Reader, sent: Annotated[PointSent, Depends(body_of(PointSent))]
) -> Response:
    """Voltages, currents and power of a circuit, clear or with a shunt, and what its relay does."""
    from service.application.calculations import point

    found = _find(request, caller, sent)
    nominal, worst = point(found.cases, None if sent.shunt is None else sent.shunt.shunt())
    stated = found.stated(CAUTION if sent.shunt is None else SURFACE_CAUTION)
    values = calculations.point_values(nominal)
    if worst is None:
        return answer(PointAnswer(**stated, **values))
    cases = {"nominal": values, "worst_case": calculations.point_values(worst)}
    return answer(PointCasesAnswer.model_validate(stated | cases))


@router.post("/shunt-limits", response_model=LimitsReply)
def calculate_shunt_limits(
    request: Request, caller: Reader, sent: Annotated[LimitsSent, Depends(body_of(LimitsSent))]
) -> Response:
    """Drop shunt and pick-up shunt at both ends, in the middle and at the worst place."""
    from service.application.calculations import limits

    found = _find(request, caller, sent)
    nominal, worst = limits(found.cases)
    stated, values = found.stated(SURFACE_CAUTION), calculations.limits_values(nominal)
    if worst is None:
        return answer(LimitsAnswer(**stated, **values))
    cases = {"nominal": values, "worst_case": calculations.limits_values(worst)}
    return answer(LimitsCasesAnswer.model_validate(stated | cases))


@router.post("/season", response_model=SeasonReply)
def calculate_season(
    request: Request, caller: Reader, sent: Annotated[SeasonSent, Depends(body_of(SeasonSent))]
) -> Response:
    """A circuit from its wettest ballast to its driest: where its relay works and a train shunts it."""
    from service.application import circuits
    from service.application.calculations import season

    found = _find(request, caller, sent)
    weather = circuits.weather(sent.wet_ohm_km, sent.dry_ohm_km, sent.minimum_shunt_ohm, found.registered)
    nominal, worst = season(found.cases, weather.wet_ohm_km, weather.dry_ohm_km, weather.minimum_shunt_ohm)
    stated = found.stated(SURFACE_CAUTION) | calculations.season_range(weather)
    values = calculations.season_values(nominal)
    if worst is None:
        return answer(SeasonAnswer(**stated, **values))
    cases = {"nominal": values, "worst_case": calculations.season_values(worst)}
    return answer(SeasonCasesAnswer.model_validate(stated | cases))


def _requirements(found: _Found, sent: AskedToSet) -> Requirements:
    from service.application import circuits

    needed = sent.requirements
    weather = circuits.weather(
        needed.wet_ohm_km,
        needed.dry_ohm_km,
        needed.minimum_shunt_ohm,
        found.registered,
        "/requirements",
    )
    return feed_settings.requirements(
        needed, weather.wet_ohm_km, weather.dry_ohm_km, weather.minimum_shunt_ohm
    )


@router.post("/setting", response_model=SettingReply)
def calculate_setting(
    request: Request, caller: Reader, sent: Annotated[SettingSent, Depends(body_of(SettingSent))]
) -> Response:
    """The settings of a feed that meet every requirement in any ballast, the best of them, and what binds."""
    from service.application.feed_settings import adjustment, setting

    found = _find(request, caller, sent)
    asked = None if sent.adjustment is None else sent.adjustment.adjustment(found.registered)
    adjusted = adjustment(asked, found.registered)
    settings = setting(found.cases, _requirements(found, sent), adjusted)
    stated = found.stated(SURFACE_CAUTION) | {"adjust": adjusted.adjust}
    values = feed_settings.setting_values(settings)
    if settings.worst is None:
        return answer(SettingAnswer(**stated, **dict(values)))
    worst = feed_settings.window_answer(settings.worst)
    return answer(SettingCasesAnswer(**stated, nominal=values, worst_case=worst))


@router.post("/longest", response_model=LongestReply)
def calculate_longest(
    request: Request, caller: Reader, sent: Annotated[LongestSent, Depends(body_of(LongestSent))]
) -> Response:
    """The longest circuit that meets every requirement in any ballast, and what binds it."""
    from service.application.feed_settings import longest

    found = _find(request, caller, sent)
    adjusted = None if sent.adjustment is None else sent.adjustment.adjustment(found.registered)
    nominal, worst = longest(found.cases, _requirements(found, sent), sent.upto_m, adjusted)
    stated, values = found.stated(SURFACE_CAUTION), feed_settings.longest_values(nominal)
    if found.cases.spread is None:
        return answer(LongestAnswer(**stated, **dict(values)))
    worst_case = None if worst is None else feed_settings.longest_values(worst)
    return answer(LongestCasesAnswer(**stated, nominal=values, worst_case=worst_case))


@router.post("/ballast", response_model=BallastAnswer)
def calculate_ballast(
    request: Request, caller: Reader, sent: Annotated[BallastSent, Depends(body_of(BallastSent))]
) -> Response:
    """Ballast from what was read at both ends of a section, with its uncertainty."""
    from service.application.ballast_estimates import ballast

    found = _find(request, caller, sent)
    shunt = None if sent.drop_shunt is None else sent.drop_shunt.shunt()
    estimate = ballast(found.cases.nominal, sent.readings.readings(), sent.trust(), shunt)
    return answer(
        BallastAnswer(**found.stated(SURFACE_CAUTION), **ballast_estimates.ballast_values(estimate))
    )


@router.post("/rail-balance", response_model=BalanceAnswer)
def calculate_rail_balance(
    request: Request, caller: Reader, sent: Annotated[BalanceSent, Depends(body_of(BalanceSent))]
) -> Response:
    """How the traction return current divides between the rails, and what that does to impedance bonds."""
    from service.application import traction_currents as currents

    turns = saturated = None
    if sent.depot is not None and sent.section is not None:
        _refuse_other_depots(caller, sent.depot)
        with service_of(request).read() as connection:
            turns = currents.registered_turns(connection, sent.depot, sent.section)
    balance = currents.balance(sent.drops(turns))
    if sent.saturated_bond_ohm is not None:
        found = _find(request, caller, Asked(depot=sent.depot, section=sent.section))
        points = currents.saturated(found.cases.nominal, complex(*sent.saturated_bond_ohm))
        saturated = traction_currents.saturated_answer(points)
    return answer(
        BalanceAnswer(
            depot=sent.depot,
            section=sent.section,
            model=currents.BALANCE_MODEL,
            assumptions=list(currents.BALANCE_ASSUMPTIONS),
            caution=CAUTION,
            saturated=saturated,
            **traction_currents.balance_values(balance),
        )
    )


@router.post(
    "/interference",
    response_model=InterferenceReply,
)
def calculate_interference(
    request: Request, caller: Reader, sent: Annotated[InterferenceSent, Depends(body_of(InterferenceSent))]
) -> Response:
    """What traction current in the rails puts across the relay, with a train at either end or none."""
    from service.application.traction_currents import interference

    found = _find(request, caller, sent)
    nominal, worst = interference(found.cases, sent.traction())
    stated, values = found.stated(), traction_currents.interference_values(nominal)
    if worst is None:
        return answer(InterferenceAnswer(**stated, **dict(values)))
    worst_case = traction_currents.interference_values(worst)
    return answer(InterferenceCasesAnswer(**stated, nominal=values, worst_case=worst_case))


@router.post("/bonding-proof", response_model=ProofAnswer)
def calculate_bonding_proof(
    request: Request, caller: Reader, sent: Annotated[ProofSent, Depends(body_of(ProofSent))]
) -> Response:
    """Which open bond, broken rail or shorted joint a relay reveals, and where trains would go undetected."""
    from service.application import bonding_proofs as proofs

    layout = sent.layout
    if layout is None:
        assert sent.depot is not None
        assert sent.section is not None
        _refuse_other_depots(caller, sent.depot)
        with service_of(request).read() as connection:
            layout = proofs.registered(connection, sent.depot, sent.section)
    proof = proofs.proof(layout, sent.shunt_ohm, sent.first_fault)
    return answer(
        ProofAnswer(
            depot=sent.depot,
            section=sent.section,
            model=proofs.MODEL,
            assumptions=list(proofs.ASSUMPTIONS),
            caution=SURFACE_CAUTION,
            **bonding_proofs.proof_values(proof),
        )
    )
