"""Spreadsheets that are zip archives, settled so that their bytes depend on their content alone."""

import re
import zipfile
from datetime import datetime
from io import BytesIO
from pathlib import Path
from typing import Final

_STAMP: Final = (2000, 1, 1, 0, 0, 0)


def settle(path: Path, when: datetime) -> None:
    """Rewrite a zip archive with fixed dates, inside and out.

    Entries are stored, not deflated: zlib's many builds do not agree on the compressed bytes.
    """
    text = when.strftime("%Y-%m-%dT%H:%M:%SZ").encode()
    settled = BytesIO()
    with zipfile.ZipFile(path) as old, zipfile.ZipFile(settled, "w", zipfile.ZIP_STORED) as new:
        for entry in old.infolist():
            body = old.read(entry)
            if entry.filename == "docProps/core.xml":
                body = re.sub(rb"(<dcterms:modified[^>]*>)[^<]*", rb"\g<1>" + text, body)
            new.writestr(zipfile.ZipInfo(entry.filename, _STAMP), body)
    path.write_bytes(settled.getvalue())
