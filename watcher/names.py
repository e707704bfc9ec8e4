"""Names of result files: made of an export's name, and safe on every file system and in every shell.

An export's name is foreign text. What is not plain is replaced, and then a short hash of the whole name keeps two
exports apart.
"""

from __future__ import annotations

import hashlib
import re

_PLAIN = re.compile(r"[A-Za-z0-9._-]+")
_OTHER = re.compile(r"[^A-Za-z0-9._-]+")
#: Names that Windows keeps for devices, with any extension; a share may be served from there.
_RESERVED = re.compile(r"(con|prn|aux|nul|com[0-9]|lpt[0-9])(\..*)?", re.IGNORECASE)
#: Leaves room for month folder, revision, extension and a temporary suffix within 255 bytes.
LONGEST = 120
HASH_CHARACTERS = 8


def safe_name(export: str) -> str:
    """Return the name that an export's result files begin with.

    >>> safe_name("FL-0412.csv")
    'FL-0412.csv'
    >>> safe_name("../brine/ä b.csv").startswith("brine-b.csv-")
    True
    """
    plain = (
        _PLAIN.fullmatch(export)
        and not _RESERVED.fullmatch(export)
        and not export.startswith(".")
        and len(export) <= LONGEST
    )
    if plain:
        return export
    digest = hashlib.sha256(export.encode("utf-8", "surrogatepass")).hexdigest()[:HASH_CHARACTERS]
    kept = _OTHER.sub("-", export).strip(".-")[:LONGEST].rstrip(".-") or "export"
    kept = re.sub(r"[.-]*-[.-]*", "-", kept)
    return f"{'_' if _RESERVED.fullmatch(kept) else ''}{kept}-{digest}"


def target(export: str, revision: int, accepted_at: str, extension: str) -> str:
    """Return the path of a result file under the results folder.

    >>> target("FL-0412.csv", 1, "2026-12-01T04:30:00.000000Z", "json")
    '2026-12/FL-0412.csv.r1.json'
    """
    return f"{accepted_at[:7]}/{safe_name(export)}.r{revision}.{extension}"
