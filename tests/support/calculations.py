"""Calculations under test: a served app with a depot and a limit book, and circuits to ask about."""

from __future__ import annotations

import json
from dataclasses import dataclass
from datetime import date
from typing import Any

import httpx

from service.application import editions, sections
from service.application import equipment as parts
from service.rules.words import CircuitKind
from support import limit_books
from support.api import ACTOR, Api
from support.register import plain

UK = {
    "frequency_hz": 0,
    "feed": {"emf_v": 10, "series_ohm": [7.2, 0]},
    "line": {"length_m": 1000, "loop_ohm_per_km": [0.0578, 0], "ballast_ohm_km": 3.0},
    "relay": {"impedance_ohm": [20, 0], "series_ohm": [0, 0], "pick_up_v": 1.62, "drop_away_v": 1.1},
}
"""Plain circuit of the university model of UK DC circuits (Space Weather 2023), wet."""

REGISTERED: dict[str, Any] = {
    "feed": {"emf_v": 10.0, "emf_low_v": 9.5, "emf_high_v": 11.0, "series_ohm": [7.2, 0]},
    "line": {"loop_ohm_per_km": [0.0578, 0], "loop_high_ohm_per_km": [0.0867, 0]},
    "ballast_wet_ohm_km": 3.0,
    "ballast_dry_ohm_km": 40.7,
}
RELAY = {"impedance_ohm": [20, 0], "rated_pick_up_a": 0.081, "rated_drop_away_a": 0.055}
AC_RELAY = {"impedance_ohm": [120, 200], "rated_pick_up_v": 10.0, "rated_drop_away_v": 6.0}
LOCAL = {"local_v": 110.0, "local_angle_deg": -20.0, "rated_local_v": 110.0, "ideal_angle_deg": 0.0}
BOND = {"impedance_ohm": [0.03, 0.35], "turns": 16}

OF_KIND: dict[str, dict[str, Any]] = {
    "dc": {"relay": RELAY},
    "dc_ac_immune": {"relay": RELAY | {"immunity_v": 50.0}},
    "ac_single_rail": {
        "frequency_hz": 50.0,
        "line": {"loop_ohm_per_km": [0.31, 0.39]},
        "feed": {"emf_v": 16.0, "series_ohm": [1.5, 0.5]},
        "relay": {"impedance_ohm": [4, 3], "rated_pick_up_v": 1.0, "rated_drop_away_v": 0.6} | LOCAL,
    },
    "ac_double_rail": {
        "frequency_hz": 50.0,
        "line": {"loop_ohm_per_km": [0.45, 0.6]},
        "feed": {"emf_v": 220.0, "series_ohm": [400, 0]},
        "feed_transformer_ratio": 20.0,
        "relay_transformer_ratio": 1 / 13,
        "feed_bond": BOND | {"impedance_ohm": [2.5, 0.4]},
        "relay_bond": BOND | {"impedance_ohm": [2.5, 0.4]},
        "relay": AC_RELAY,
    },
    "audio_frequency": {
        "frequency_hz": 1700.0,
        "line": {"loop_ohm_per_km": [0.6, 13.0]},
        "feed": {"emf_v": 3.0, "series_ohm": [0.4, 0]},
        "feed_tuned_zone_m": 20.0,
        "relay_tuned_zone_m": 20.0,
        "relay": {"impedance_ohm": [1, 0.2], "rated_pick_up_v": 0.1, "rated_drop_away_v": 0.07},
    },
    "impulse": {"relay": RELAY},
    "coded": {"relay": RELAY},
}
"""What each kind's equipment says beside, or in place of, what is common."""


def equipment(kind: str, **changes: Any) -> parts.Common:
    """The equipment of one kind, as registered, but for the changes; a change to None leaves a member out."""
    said = {"circuit_kind": kind} | REGISTERED | OF_KIND[kind] | changes
    found: parts.Common = parts.of_text(json.dumps(said))
    return found


@dataclass
class Bench:
    """The served app, one reader's client, and a depot to register sections in."""

    api: Api
    client: httpx.Client

    def post(self, calculation: str, body: Any) -> httpx.Response:
        return self.client.post(f"/v1/calculations/{calculation}", json=body)

    def ask(self, calculation: str, body: Any) -> dict[str, Any]:
        """The answer, which is one."""
        response = self.post(calculation, body)
        assert response.status_code == 200, response.text
        found: dict[str, Any] = response.json()
        return found

    def refused(self, calculation: str, body: Any) -> list[tuple[str, str | None]]:
        """Code and pointer of each fault of what is refused."""
        response = self.post(calculation, body)
        assert response.status_code == 422, response.text
        return [(fault["code"], fault.get("pointer")) for fault in response.json()["errors"]]

    def section(self, name: str, kind: str = "dc", length_m: float | None = 1000.0, **changes: Any) -> str:
        """Register a section and give its name; `equipment` and members of a section may be changed."""
        given = {
            "equipment": equipment(kind),
            "length_m": length_m,
            "circuit_kind": CircuitKind(kind),
        } | changes
        with self.api.service.unit_of_work(ACTOR) as tx:
            sections.create(tx, "ashby", name, plain(**given))
        return name

    def book(self, **changes: Any) -> str:
        """A book in force today, its clock moved on; gives its name."""
        draft = limit_books.draft_of(limit_books.edition(**changes))
        with self.api.service.unit_of_work(limit_books.DRAFTER) as tx:
            editions.draft(tx, draft)
        day = date.fromordinal(self.api.clock.now.toordinal() + 2)
        with self.api.service.unit_of_work(limit_books.ISSUER) as tx:
            editions.issue(tx, draft.book, draft.edition, day, expected=1)
        self.api.clock.move(days=2)
        return draft.book


def named(section: str, **more: Any) -> dict[str, Any]:
    """The body that asks about a registered section."""
    return {"depot": "ashby", "section": section} | more


def plain_circuit(**changes: Any) -> dict[str, Any]:
    """The UK circuit; `line={"length_m": 680}` changes one member of a part."""
    return UK | {
        name: (UK[name] | value if isinstance(value, dict) else value)  # type: ignore[operator]
        for name, value in changes.items()
    }
