"""Which scope each route needs, as the table in DEVELOPERS.md: `python -m support.scopes` in `tests/`."""

from __future__ import annotations

from typing import Any

BEGIN, END = "<!-- scopes: begin -->", "<!-- scopes: end -->"


def table(document: dict[str, Any]) -> str:
    """The Markdown table of an OpenAPI document, in order of address."""
    rows = [
        (path, method.upper(), operation.get("x-scope", "no key needed"))
        for path, operations in document["paths"].items()
        for method, operation in operations.items()
    ]
    lines = [f"| {method} | `{path}` | {scope} |" for path, method, scope in sorted(rows)]
    return "\n".join(["| Method | Address | Scope |", "| --- | --- | --- |", *lines])


if __name__ == "__main__":
    from service.app import create_app
    from service.settings import Settings

    print(BEGIN, table(create_app(Settings(database_url="sqlite://")).openapi()), END, sep="\n")
