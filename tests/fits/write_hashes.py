"""Write purity/data/hashes.json, the hashes of the tables as they are released.

Run it after a table was changed on purpose: ``python tests/fits/write_hashes.py``.
"""

from __future__ import annotations

import json

from purity.table_files import DATA, file_hashes

if __name__ == "__main__":
    text = json.dumps(file_hashes(DATA), indent=1) + "\n"
    (DATA / "hashes.json").write_text(text, encoding="utf-8", newline="\n")
