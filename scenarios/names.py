"""Names of features as names of files: any text a person gives a well becomes a name that every system can store."""

import re
import unicodedata
from collections.abc import Collection

_SPELT = str.maketrans(
    {"ä": "ae", "ö": "oe", "ü": "ue", "ß": "ss", "ø": "o", "æ": "ae", "å": "aa", "ł": "l", "đ": "d",
     "Ä": "Ae", "Ö": "Oe", "Ü": "Ue", "Ø": "O", "Æ": "Ae", "Å": "Aa", "Ł": "L", "Đ": "D"}
)  # fmt: skip
_RESERVED = {"con", "prn", "aux", "nul", *(f"{port}{n}" for port in ("com", "lpt") for n in range(1, 10))}
_LONGEST = 60


def safe_file_name(name: str, taken: Collection[str] = ()) -> str:
    """An ASCII file name without an ending for a feature's name, different from all in ``taken``.

    Letters, digits, '-' and '_' only, so that no path can be spelt. Names that differ in case only count as equal,
    since some systems do not tell them apart.

    >>> safe_file_name("Mühle 1/2"), safe_file_name("../etc"), safe_file_name("mill 1", {"Mill_1"})
    ('Muehle_1_2', 'etc', 'mill_1_2')
    """
    plain = unicodedata.normalize("NFKD", unicodedata.normalize("NFC", name).translate(_SPELT))
    plain = plain.encode("ascii", "ignore").decode()
    stem = re.sub(r"[^A-Za-z0-9-]+", "_", plain).strip("_-")[:_LONGEST] or "unnamed"
    if stem.casefold() in _RESERVED:
        stem += "_"
    used = {t.casefold() for t in taken}
    found, n = stem, 1
    while found.casefold() in used:
        n += 1
        found = f"{stem}_{n}"
    return found
