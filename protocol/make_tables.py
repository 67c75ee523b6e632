"""Write the tables of README.md from `codes.json`, between their marks.

python protocol/make_tables.py            write protocol/README.md
python protocol/make_tables.py --check    exit 1 when a table there is not what codes.json makes of it
"""

import json
import re
import sys
from pathlib import Path
from typing import Any

HERE = Path(__file__).resolve().parent
README = HERE / "README.md"

# group in codes.json: (heading, member) of each column
COLUMNS = {
    "states": (("code", "code"), ("state", "id"), ("means", "text")),
    "stages": (("code", "code"), ("stage", "id"), ("means", "text")),
    "ends": (("code", "code"), ("end", "id"), ("means", "text")),
    "faults": (("code", "code"), ("fault", "id"), ("means", "text"), ("what to do", "remedy")),
    "flags": (("bit", "bit"), ("flag", "id"), ("means", "text")),
    "errors": (("code", "code"), ("name", "id"), ("message", "text")),
}
NAMES = {"id"}


def table(rows: list[dict[str, Any]], columns: tuple[tuple[str, str], ...]) -> str:
    """Return one table in Markdown."""
    lines = ["| " + " | ".join(heading for heading, _ in columns) + " |", "|" + "---|" * len(columns)]
    for row in rows:
        cells = [f"`{row[member]}`" if member in NAMES else str(row[member]) for _, member in columns]
        lines.append("| " + " | ".join(cells) + " |")
    return "\n".join(lines)


def with_tables(text: str, codes: dict[str, Any]) -> str:
    """Return the page with every table between its marks made anew. KeyError for a mark without a group."""

    def made(match: re.Match[str]) -> str:
        group = match[1]
        return f"<!-- {group} -->\n{table(codes[group], COLUMNS[group])}\n<!-- end of {group} -->"

    return re.sub(r"<!-- (\w+) -->\n.*?<!-- end of \1 -->", made, text, flags=re.DOTALL)


def main() -> int:
    """Write, or compare."""
    before = README.read_text(encoding="utf-8")
    after = with_tables(before, json.loads((HERE / "codes.json").read_text(encoding="utf-8")))
    if "--check" in sys.argv[1:]:
        return 0 if before == after else 1
    README.write_text(after, encoding="utf-8")
    return 0


if __name__ == "__main__":
    sys.exit(main())
