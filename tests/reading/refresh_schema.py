"""Writes the schema's part on families anew: run this file with python after a family is added."""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parents[2]
SCHEMA = ROOT / "schema" / "model-1.schema.json"


def written(schema: dict[str, Any]) -> str:
    """The text of the schema file."""
    return json.dumps(schema, indent=1, ensure_ascii=False) + "\n"


def fresh() -> str:
    """The schema's text as it follows from the families of the registry."""
    from outspread.laws.registry import FAMILIES
    from outspread.reading.parameters import refreshed

    return written(refreshed(json.loads(SCHEMA.read_text(encoding="utf-8")), FAMILIES))


if __name__ == "__main__":
    sys.path.insert(0, str(ROOT / "compiler"))
    SCHEMA.write_text(fresh(), encoding="utf-8")
