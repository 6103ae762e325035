"""Sections of the register: their record as it is judged.

Creating, editing and listing them follow here.
"""

from __future__ import annotations

from service.application.section_records import feed_emf_v, record

__all__ = ["feed_emf_v", "record"]
