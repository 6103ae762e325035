"""How much a client may send or ask for at once; `GET /v1` tells, and the routes hold to it.

Clients rely on these, so they are no settings.
"""

BODY_BYTES = 2 * 1024 * 1024
BATCH_VISITS = 500
IMPORT_BYTES = 32 * 1024 * 1024
IMPORT_LINES = 20_000
PAGE_SIZE = 1000
REMARKS_CHARACTERS = 2000
