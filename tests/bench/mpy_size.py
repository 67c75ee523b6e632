"""How large the firmware is: sources, compiled as they are, and built for the board (constants folded).

python -m tests.bench.mpy_size
"""

from __future__ import annotations

from dwellbench import assets
from dwellbench.firmware_build import compiled, sources
from dwellbench.firmware_fold import fold

GOAL = 40_000


def main() -> None:
    """Print bytes a module, the largest first, and the sums."""
    plain = {name: text for name, text in sources(assets.device()).items() if name != "main"}
    folded = fold(sources(assets.device()))
    rows = [
        (len(compiled(name, folded[name])), len(compiled(name, text)), len(text.encode()), name)
        for name, text in plain.items()
    ]
    print(f"{'built':>8}{'compiled':>10}{'source':>9}")
    for built, straight, source, name in sorted(rows, reverse=True):
        print(f"{built:8}{straight:10}{source:9}  {name}")
    built, straight, source = (sum(row[place] for row in rows) for place in range(3))
    print(f"{built:8}{straight:10}{source:9}  all; goal {GOAL}: {'met' if built <= GOAL else 'not met'}")


if __name__ == "__main__":
    main()
