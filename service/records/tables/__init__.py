"""Every table, and the metadata that migrations are compared with."""

from sqlmodel import SQLModel

from service.records.tables.access import AccessKey, Depot
from service.records.tables.audits import Audit, AuditRow, Finding
from service.records.tables.books import BookEdition, LimitBook
from service.records.tables.journal import JournalHead, JournalLine
from service.records.tables.register import Concession, Section, SectionVersion, Status
from service.records.tables.visits import CalibrationRow, InstrumentRow, Latest, ReadingRow, VisitRow, VoidRow

metadata = SQLModel.metadata

__all__ = [
    "AccessKey",
    "Audit",
    "AuditRow",
    "BookEdition",
    "CalibrationRow",
    "Concession",
    "Depot",
    "Finding",
    "InstrumentRow",
    "JournalHead",
    "JournalLine",
    "Latest",
    "LimitBook",
    "ReadingRow",
    "Section",
    "SectionVersion",
    "Status",
    "VisitRow",
    "VoidRow",
    "metadata",
]
