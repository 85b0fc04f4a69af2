"""Writes docs/report.schema.json from the reports of the samples; takes about half a minute.

Run ``python docs/generate_report_schema.py`` after a change of what any command returns; tests/reporting/report checks
that the samples keep to it.
"""

from __future__ import annotations

import json
import sys
import tempfile
from pathlib import Path

ROOT = Path(__file__).parent.parent


def main() -> int:
    """Write the schema; the exit code."""
    import earthwork
    from earthwork.reporting.document import document
    from earthwork.reporting.report.schema import schema_of

    documents = []
    for site in sorted(ROOT.glob("samples/*/*.toml")):
        with tempfile.TemporaryDirectory() as folder:
            result = earthwork.report(site, out=Path(folder) / "report", only=["json"])
        documents.append(document("report", result.parts.site, result))
    text = json.dumps(schema_of(documents), ensure_ascii=False, indent=1) + "\n"
    (ROOT / "docs" / "report.schema.json").write_text(text, encoding="utf-8")
    print("wrote docs/report.schema.json")
    return 0


if __name__ == "__main__":
    sys.exit(main())
