"""Write the firmware's `codes.py` from `codes.json`, the one source of states, faults, errors and bits.

python protocol/make_codes.py            write device/dwellbox/codes.py
python protocol/make_codes.py --check    exit 1 when it is not what codes.json makes of it
"""

import json
import sys
from pathlib import Path
from typing import Any

HERE = Path(__file__).resolve().parent
TARGET = HERE.parent / "device" / "dwellbox" / "codes.py"

HEAD = '''"""States, stages, faults, ends, errors and bits, generated from protocol/codes.json by protocol/make_codes.py."""

from .compat import const
'''

# (group in codes.json, prefix of its names, the member that numbers it, name of the tuple of ids for people)
GROUPS = (
    ("states", "", "code", "STATES"),
    ("stages", "ST_", "code", "STAGES"),
    ("ends", "END_", "code", "ENDS"),
    ("faults", "FAULT_", "code", "FAULTS"),
    ("channels", "CH_", "code", None),
    ("inputs", "IN_", "bit", None),
    ("outputs", "OUT_", "bit", None),
    ("flags", "FLAG_", "bit", None),
    ("errors", "E_", "code", None),
)


def constants(rows: list[dict[str, Any]], prefix: str, member: str) -> list[str]:
    """Return one line a row; bits become masks."""
    lines = []
    for row in rows:
        value = 1 << row["bit"] if member == "bit" else row["code"]
        lines.append(f"{prefix}{row['id'].upper()} = const({value})")
    return lines


def names(rows: list[dict[str, Any]], name: str) -> list[str]:
    """Return the tuple of ids; the code is the place."""
    if [row["code"] for row in rows] != list(range(len(rows))):
        raise SystemExit(f"codes.json: the codes of {name} must count from 0 without gaps")
    return [f"{name} = ("] + [f'    "{row["id"]}",' for row in rows] + [")"]


def generate(codes: dict[str, Any]) -> str:
    """Return the text of codes.py."""
    lines = [HEAD]
    protocol = codes["protocol"]
    lines += [f"PROTOCOL_MAJOR = const({protocol['major']})", f"PROTOCOL_MINOR = const({protocol['minor']})"]
    for group, prefix, member, tuple_name in GROUPS:
        lines += ["", f"# {group}", *constants(codes[group], prefix, member)]
        if tuple_name:
            lines += names(codes[group], tuple_name)
    lines += ["", "ERRORS = {"]
    lines += [f'    {row["code"]}: "{row["text"]}",' for row in codes["errors"]]
    lines += ["}", ""]
    return "\n".join(lines)


def main() -> int:
    """Write, or compare."""
    text = generate(json.loads((HERE / "codes.json").read_text(encoding="utf-8")))
    if "--check" in sys.argv[1:]:
        same = TARGET.exists() and TARGET.read_text(encoding="utf-8") == text
        return 0 if same else 1
    TARGET.write_text(text, encoding="utf-8")
    return 0


if __name__ == "__main__":
    sys.exit(main())
