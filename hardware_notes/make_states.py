"""Write `states.md` from the firmware's table of legal moves.

python hardware_notes/make_states.py            write it
python hardware_notes/make_states.py --check    exit 1 when it is not what the table makes of it
"""

import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path.append(str(HERE.parent / "device"))

from dwellbox import sequence  # noqa: E402
from dwellbox.codes import LOCKOUT, STATES  # noqa: E402

HEAD = """# States and legal moves

Drawn from `device/dwellbox/sequence.py` by `make_states.py`; do not edit. From every state a fault leads to `lockout`: supply off,
bleed on, lid locked until discharge is proven, reason kept. An event that a state lacks, or whose guard does not hold, is such a
fault too.

"""

GUARDS = (
    (sequence.PROVEN, "discharge proven"),
    (sequence.CLEAR, "no latched reason"),
    (sequence.CALM, "no joint condition stands"),
    (sequence.SHUT, "lid closed by both switches"),
    (sequence.ACCOUNTED, "no charge missing"),
    (sequence.WATCH, "the plan asks for the rebound to be watched"),
)


def rows() -> list[tuple[str, str, str, str]]:
    """State, event, guard in words, next state; faults left out."""
    found = []
    for state, row in sequence.MOVES.items():
        for event, ways in row.items():
            for guard, after in ways:
                if after != LOCKOUT:
                    words = ", ".join(text for bit, text in GUARDS if guard & bit)
                    found.append((STATES[state], sequence.EVENTS[event], words, STATES[after]))
    return found


def generate() -> str:
    """The page."""
    moves = rows()
    lines = ["| in | event | only with | to |", "|---|---|---|---|"]
    lines += [f"| `{before}` | {event} | {guard} | `{after}` |" for before, event, guard, after in moves]
    lines += ["", "```mermaid", "stateDiagram-v2", "    [*] --> waking"]
    lines += [f"    {before} --> {after}: {event}" for before, event, _, after in moves]
    lines += ["```", ""]
    return HEAD + "\n".join(lines)


def main() -> int:
    """Write, or compare."""
    page = HERE / "states.md"
    if "--check" in sys.argv[1:]:
        return 0 if page.exists() and page.read_text(encoding="utf-8") == generate() else 1
    page.write_text(generate(), encoding="utf-8")
    return 0


if __name__ == "__main__":
    sys.exit(main())
