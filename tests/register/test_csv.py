"""The register as CSV, read back by RFC 4180's rules, and imports of whole files, on both databases."""

from __future__ import annotations

import csv
import io
import json
from dataclasses import replace
from datetime import date, timedelta
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import TypeAdapter

from service.api import bounds, section_files
from service.api.schemas.sections import SectionDraft, SectionLine
from service.application import csv_cells, section_lists, sections, sections_csv, sections_import
from service.application.equipment import Equipment
from service.application.section_content import Boundary, json_value
from service.application.section_lists import Filters
from service.errors import Fault, NotAcceptableError, TooLargeError, UnparsableError
from service.rules.words import CircuitKind, SectionState, Separation, Traction
from support.register import Depot, plain

LAYOUT = {
    "frequency_hz": 0,
    "loop_ohm_per_km": [0.1, 0],
    "ballast_ohm_km": [3, 5],
    "rail_to_earth_ohm_km": None,
    "legs": [{"name": "a", "start": ["a1", "a2"], "end": ["b1", "b2"], "length_m": 60}],
    "bonds": [{"name": "x", "between": ["b1", "a1"], "resistance_ohm": 0.0015}],
    "joints": [],
    "feed": {"across": ["a1", "a2"], "emf_v": 3, "series_ohm": [1.5, 0]},
    "relay": {"across": ["b1", "b2"], "impedance_ohm": [9, 0], "pick_up_v": 1.4, "drop_away_v": 0.95},
}

texts = st.text(st.characters(codec="utf-8", exclude_categories=["Cc", "Cs"]), min_size=1, max_size=12)
lines = st.one_of(
    texts, st.sampled_from(["=1+1", "'=1", "''", "-5", "+", "@a", "a;b", 'a"b', "a\r\nb", "\tx"])
)
names = st.text("AZaz09._()-", min_size=1, max_size=8)
numbers = st.floats(0, 1e4, allow_subnormal=False)
days = st.dates(date(1900, 1, 1), date(2100, 1, 1)).map(date.isoformat)
impedances = st.tuples(numbers, st.floats(-1e4, 1e4)).map(list)


def maybe(strategy: st.SearchStrategy[Any]) -> st.SearchStrategy[Any]:
    return st.none() | strategy


def record(**members: st.SearchStrategy[Any]) -> st.SearchStrategy[dict[str, Any]]:
    return st.fixed_dictionaries({}, optional=members)


items = {"type": texts, "serial": texts, "fitted_on": days, "tested_on": days, "overhauled_on": days}
feeds = record(
    **items, emf_v=numbers, taps_v=st.lists(numbers, min_size=1, max_size=3), series_ohm=impedances
)
relays = record(**items, rated_pick_up_v=numbers, bench_drop_away_a=numbers, impedance_ohm=impedances)
set_ups = st.lists(
    st.fixed_dictionaries(
        {
            "quantity": st.sampled_from(["relay_voltage", "drop_shunt"]),
            "test_point": names.map("leg:{}".format),
        }
        | {"value": numbers}
    ),
    min_size=1,
    max_size=3,
)
equipments = st.builds(
    lambda kind, parts, more: {"circuit_kind": kind} | parts | more,
    st.just("ac_double_rail"),
    record(feed=feeds, relay=relays, receivers=st.integers(0, 3), choke=st.booleans(), set_up=set_ups),
    record(feed_bond=record(turns=st.integers(1, 9), resonated=st.booleans()), frequency_hz=st.just(83.3)),
)
boundaries = st.fixed_dictionaries(
    {
        "boundary": names,
        "neighbour": maybe(names),
        "separation": st.sampled_from(["joint", "tuned_zone"]),
        "polarity": maybe(st.sampled_from(["+", "-", "83.3 Hz", "=A"])),
    }
)
documents = st.fixed_dictionaries(
    {
        "section": names,
        "state": st.sampled_from(list(map(str, SectionState))),
        "circuit_kind": st.just("ac_double_rail"),
        "traction": st.sampled_from(list(map(str, Traction))),
        "required_test_points": st.lists(st.sampled_from(["feed_end", "relay_end", "leg:7"]), min_size=1),
        "adjacent": st.lists(boundaries, max_size=3),
    },
    optional={
        "title": lines,
        "line_name": lines,
        "from_km": st.floats(-1e4, 1e4),
        "length_m": st.floats(0.1, 1e4),
        "return_rails": st.integers(0, 2),
        "commissioned_on": days,
        "asset_reference": lines,
        "configuration": record(points_ends=st.integers(0, 5), interrupter_fitted=st.booleans()),
        "equipment": equipments,
        "layout": st.just(LAYOUT),
    },
)


def written(*documents: dict[str, Any]) -> bytes:
    return "".join(sections_csv.write(documents)).encode()


def cells(content: bytes) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(content.decode("utf-8-sig"), newline="")))


@given(st.lists(documents, min_size=1, max_size=3))
def test_what_is_written_reads_back_the_same(given_documents: list[dict[str, Any]]) -> None:
    sent = [SectionDraft.model_validate_json(json.dumps(document)) for document in given_documents]
    shown = [{"section": one.section} | json_value(one.content()) for one in sent]
    read = sections_csv.read(written(*shown), 10)
    assert read.missing == ()
    again = [SectionLine.model_validate_json(json.dumps(line.document)) for line in read.lines]
    assert [{"section": one.section} | json_value(one.content()) for one in again] == shown


@given(st.text())
def test_a_guarded_cell_is_no_formula_and_comes_back(text: str) -> None:
    guarded = csv_cells.guarded(text)
    assert not guarded.startswith(("=", "+", "-", "@", "\t", "\r", "\n"))
    assert csv_cells.unguarded(guarded) == text


def test_the_file_is_what_the_standard_asks_for() -> None:
    """RFC 4180: CRLF after each record, quotes doubled, a comma or a line break inside quotes."""
    shown = {"section": "A", "title": 'say "x", y\n', "from_km": -1.5, "asset_reference": "-7"}
    text = written(shown).decode()
    assert text.startswith("\ufeffdepot,section,version,")
    assert text.endswith("\r\n")
    assert '"say ""x"", y\n"' in text
    only = cells(written(shown))[0]
    assert (only["from_km"], only["asset_reference"]) == ("-1.5", "'-7")


def test_lists_are_joined_by_semicolons() -> None:
    shown = {
        "section": "A",
        "required_test_points": ["feed_end", "leg:7"],
        "adjacent": [
            {"boundary": "J1", "neighbour": None, "separation": "joint", "polarity": "+"},
            {"boundary": "J2", "neighbour": "B", "separation": "joint", "polarity": None},
        ],
        "equipment": {"circuit_kind": "dc", "relay": {"impedance_ohm": [9.0, 0.0]}},
    }
    only = cells(written(shown))[0]
    assert only["required_test_points"] == "feed_end;leg:7"
    assert (only["adjacent.neighbour"], only["adjacent.polarity"]) == (";B", "'+;")
    assert only["equipment.relay.impedance_ohm"] == "9.0;0.0"


def made_by_hand(
    *rows: str, header: str = "section,state,circuit_kind,traction,required_test_points"
) -> bytes:
    return "\r\n".join([header, *rows]).encode()


def refused(content: bytes) -> list[Fault]:
    with pytest.raises(NotAcceptableError) as error:
        section_files.read(content)
    return list(error.value.faults)


def test_each_bad_line_is_named_with_its_column() -> None:
    header = "section,state,circuit_kind,traction,required_test_points,length_m,equipment.choke,return_rails"
    faults = refused(
        made_by_hand(
            'A,in_use,dc,none,middle,"1,5",,',
            "B,in_use,dc,none,middle,1.5,perhaps,",
            "C,in_use,dc,none,middle,1.5,,1.0",
            header=header,
        )
    )
    assert [(fault.line, fault.column, fault.code) for fault in faults] == [
        (2, "length_m", "not_number"),
        (3, "equipment.choke", "not_boolean"),
        (4, "return_rails", "not_integer"),
    ]


def test_a_layout_is_one_cell_of_json() -> None:
    header = "section,state,circuit_kind,traction,required_test_points,layout"
    (fault,) = refused(made_by_hand("A,in_use,dc,none,middle,{legs", header=header))
    assert (fault.line, fault.column, fault.code) == (2, "layout", "not_json")
    (fault,) = refused(made_by_hand('A,in_use,dc,none,middle,"[1,2]"', header=header))
    assert (fault.line, fault.column) == (2, "layout")


def test_a_new_section_has_no_version(depot: Depot) -> None:
    header = "section,version,state,circuit_kind,traction,required_test_points"
    with pytest.raises(NotAcceptableError) as error:
        imported(depot, made_by_hand("A,1,in_use,dc,none,middle", header=header))
    assert [(fault.code, fault.column) for fault in error.value.faults] == [("unknown_section", "version")]


def test_what_the_schema_refuses_is_named_with_its_column() -> None:
    header = "section,state,circuit_kind,traction,required_test_points,equipment.circuit_kind,equipment.code"
    faults = refused(
        made_by_hand(
            "A,used,dc,none,middle,,", "B b,in_use,dc,none,,dc,", "C,in_use,dc,none,end,dc,x", header=header
        )
    )
    assert {(fault.line, fault.column) for fault in faults} == {
        (2, "state"),
        (3, "section"),
        (3, "required_test_points"),
        (4, "required_test_points"),
        (4, "equipment.code"),
    }


def test_lines_are_those_of_the_file_not_of_the_records() -> None:
    header = "section,state,circuit_kind,traction,required_test_points,title"
    content = made_by_hand(
        'A,in_use,dc,none,middle,"two\r\nlines"', "", "B,in_use,dc,none,middle", header=header
    )
    (fault,) = refused(content)
    assert (fault.line, fault.code) == (5, "cells")


def test_unknown_and_repeated_columns_are_refused() -> None:
    faults = refused(b"section,section,lenght_m\r\nA,A,1\r\n")
    assert [(fault.code, fault.line, fault.column) for fault in faults] == [
        ("unknown_column", 1, "lenght_m"),
        ("duplicate", 1, "section"),
    ]


@pytest.mark.parametrize(
    "content",
    [b"section\r\n\xff\r\n", b'section\r\n"A\r\n', b'section\r\n"A"x\r\n', b"section\r\n" + b"A" * 200_000],
)
def test_what_is_no_csv_in_utf8_cannot_be_read(content: bytes) -> None:
    with pytest.raises(UnparsableError):
        section_files.read(content)


def test_a_file_has_a_bound() -> None:
    row = "A,in_use,dc,none,middle"
    with pytest.raises(TooLargeError):
        sections_csv.read(made_by_hand(*[row] * 4), 3)
    assert len(sections_csv.read(made_by_hand(*[row] * 3), 3).lines) == 3
    assert bounds.IMPORT_LINES == 20_000


def exported(depot: Depot) -> bytes:
    with depot.service.read(snapshot=True) as connection:
        rows = list(section_lists.every(connection, depot.depot, Filters()))
    return written(*({"status": json_value(row.status)} | row.section.document() for row in rows))


def imported(depot: Depot, content: bytes) -> sections_import.Outcome:
    outcome: sections_import.Outcome = depot.write(sections_import.run, section_files.read(content))
    return outcome


def register(depot: Depot) -> None:
    """Three sections between which polarities matter."""
    stated = TypeAdapter(Equipment).validate_json(
        '{"circuit_kind": "dc", "relay": {"serial": "=R"}, "set_up": '
        '[{"quantity": "relay_voltage", "test_point": "relay_end", "value": 2.1}]}'
    )
    depot.section("A", title="'=A", equipment=stated, adjacent=(boundary("J1", "B", "+"),))
    depot.section("B", length_m=10.1, adjacent=(boundary("J1", "A", "-"),))
    depot.section("C", state=SectionState.PLANNED)


def boundary(name: str, neighbour: str, polarity: str) -> Boundary:
    return Boundary(name, neighbour, Separation.JOINT, polarity)


def test_an_export_imports_again_unchanged(depot: Depot) -> None:
    register(depot)
    depot.later(days=2)
    content = exported(depot)
    outcome = imported(depot, content)
    assert (outcome.created, outcome.changed, outcome.unchanged) == (0, 0, 3)
    assert outcome.sequence is None
    assert exported(depot) == content


def test_an_export_makes_the_same_register_in_another_depot(depot: Depot) -> None:
    register(depot)
    content = exported(depot)
    depot.depot = "birchfield"
    blank = csv_with(content, version="")
    outcome = imported(depot, blank)
    assert outcome.created == 3
    theirs = cells(exported(depot))
    assert [{**row, "depot": "ashby", "sequence": "", "status.sequence": ""} for row in theirs] == [
        {**row, "sequence": "", "status.sequence": ""} for row in cells(content)
    ]


def csv_with(content: bytes, section: str | None = None, **changes: str) -> bytes:
    """The file with some cells changed, in every line or that of one section."""
    rows = cells(content)
    for row in rows:
        if section in (None, row["section"]):
            row |= changes
    out = io.StringIO(newline="")
    lines_of = csv.DictWriter(out, rows[0], lineterminator="\n")
    lines_of.writeheader()
    lines_of.writerows(rows)
    return out.getvalue().encode()


def test_a_changed_line_edits_its_section_and_judges_its_neighbours(depot: Depot) -> None:
    register(depot)
    depot.later(days=2)
    changed = csv_with(exported(depot), "B", **{"adjacent.polarity": "'+", "valid_from_on": ""})
    outcome = imported(depot, changed)
    assert (outcome.created, outcome.changed, outcome.unchanged) == (0, 1, 2)
    found = depot.read(sections.get, "B")
    assert (found.version, found.content.valid_from_on) == (2, depot.today)
    assert found.sequence == depot.read(sections.get, "A").sequence == outcome.sequence
    assert depot.read(sections.get, "C").sequence < found.sequence


def test_all_or_nothing(depot: Depot) -> None:
    register(depot)
    content = csv_with(exported(depot), "A", title="changed") + b"\n"
    bad = csv_with(content, "C", state="in_use", valid_from_on="2027-01-01")
    with pytest.raises(NotAcceptableError) as error:
        imported(depot, bad)
    assert [(fault.line, fault.column) for fault in error.value.faults] == [(4, "valid_from_on")]
    assert depot.read(sections.get, "A").version == 1


def test_a_line_from_an_older_version_is_stale(depot: Depot) -> None:
    register(depot)
    content = exported(depot)
    depot.write(sections.edit, "C", 1, plain(state=SectionState.PLANNED, title="newer"))
    with pytest.raises(NotAcceptableError) as error:
        imported(depot, csv_with(content, "C", title="from the file"))
    assert [(fault.code, fault.line, fault.column) for fault in error.value.faults] == [
        ("stale", 4, "version")
    ]


NAMES = [
    (["a,in_use,dc,none,middle"], ("name_taken", 2, "section")),
    (["X,in_use,dc,none,middle", "x,in_use,dc,none,middle"], ("duplicate", 3, "section")),
    (["B,in_use,dc,none,middle"], ("stale", 2, "version")),
]


def test_names_in_a_file(depot: Depot) -> None:
    register(depot)
    for rows, expected in NAMES:
        with pytest.raises(NotAcceptableError) as error:
            imported(depot, made_by_hand(*rows))
        assert [(fault.code, fault.line, fault.column) for fault in error.value.faults] == [expected]


def test_a_file_without_every_column_edits_nothing(depot: Depot) -> None:
    """What it does not name would be wiped."""
    register(depot)
    header = "section,version,state,circuit_kind,traction,required_test_points"
    with pytest.raises(NotAcceptableError) as error:
        imported(depot, made_by_hand("B,1,in_use,dc,none,feed_end;relay_end", header=header))
    assert {fault.code for fault in error.value.faults} == {"column_missing"}


def test_sections_of_one_file_may_succeed_one_another(depot: Depot) -> None:
    header = "section,state,circuit_kind,traction,required_test_points,succeeds"
    rows = ("N,in_use,dc,none,middle,O", "O,recovered,dc,none,middle,")
    assert imported(depot, made_by_hand(*rows, header=header)).created == 2
    with pytest.raises(NotAcceptableError):
        imported(depot, made_by_hand("P,in_use,dc,none,middle,Q", header=header))


def test_a_rehearsal_says_the_same_and_writes_nothing(depot: Depot) -> None:
    register(depot)
    file = section_files.read(made_by_hand("X,in_use,dc,none,middle", "Y,in_use,dc,none,middle"))
    rehearsed = depot.read(sections_import.rehearse, file, depot.clock[0])
    assert (rehearsed.created, rehearsed.sequence) == (2, None)
    before = exported(depot)
    assert replace(depot.write(sections_import.run, file), sequence=None) == rehearsed
    assert exported(depot) != before
    with pytest.raises(NotAcceptableError):
        depot.read(
            sections_import.rehearse,
            section_files.read(made_by_hand("x,in_use,dc,none,middle")),
            depot.clock[0] + timedelta(days=1),
        )


def test_every_circuit_kind_goes_through_a_file(depot: Depot) -> None:
    for kind in CircuitKind:
        stated = TypeAdapter(Equipment).validate_json(
            json.dumps({"circuit_kind": kind, "relay": {"serial": "R"}})
        )
        depot.section(f"S-{kind}", circuit_kind=kind, equipment=stated)
    assert imported(depot, exported(depot)).unchanged == len(CircuitKind)
